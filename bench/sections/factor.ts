// The numeric factorization on a known pattern, beside Eigen's.
import { factorize } from "../../src/index.js";
import { cases, singleMatrices } from "../harness/matrices.js";
import { EigenPeer } from "../harness/native.js";
import { peakRate } from "../harness/peak.js";
import type { Section } from "../harness/report.js";
import { measureInTurn } from "../harness/timing.js";

export const factor: Section = {
  name: "factor",
  timers: [
    "refactor: CholeskyFactor.refactor(matrix), pattern known, memory warm: checks, values copied into the kernel, numbers",
    "Eigen: SimplicialLLT::factorize on a known pattern, AMD order, warm allocator, one thread, -O3 -march=native",
    "GFlop/s: Σ over columns of L of (entries)² ÷ time; share of peak: ÷ the multiply-add peak of WebAssembly in this run",
  ],
  *run(options) {
    const peak = peakRate(options.time);
    for (const { family, states, matrix, information } of cases(singleMatrices, options)) {
      const ours = factorize(matrix, { blockSizes: information.blockSizes });
      const peer = EigenPeer.of(information);
      const { ours: timing, ...others } = measureInTurn(
        {
          ours: { run: () => ours.refactor(matrix) },
          ...(peer && { Eigen: { samples: (time: number) => peer.samples("factor", time) } }),
        },
        options,
      );
      const { flops, nonzeros, bytes } = ours.statistics;
      ours.dispose();
      const rate = flops / timing.median / 1e6;
      yield {
        subject: family,
        size: states,
        measure: "refactor",
        ours: timing,
        others,
        figures: {
          Mflop: flops / 1e6,
          "entries of L, M": nonzeros / 1e6,
          MB: bytes / 1e6,
          "GFlop/s": rate,
          "share of peak": rate / peak,
          ...(peer && { "flops ÷ Eigen's": flops / peer.flops }),
        },
      };
    }
  },
};
