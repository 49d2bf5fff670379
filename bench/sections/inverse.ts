// The selected inverse, beside our own factorization; and the whole diagonal from a cold matrix, beside solving for every column.
import { factorize } from "../../src/index.js";
import { cases, singleMatrices } from "../harness/matrices.js";
import { EigenPeer } from "../harness/native.js";
import type { Section } from "../harness/report.js";
import { measureInTurn, scaled } from "../harness/timing.js";

export const inverse: Section = {
  name: "inverse",
  timers: [
    "selected inverse: CholeskyFactor.inverseDiagonal() on a fresh factor: every entry on the pattern of L, the diagonal copied out",
    "own factor: CholeskyFactor.refactor(matrix), as in the section factor",
    "diagonal, cold: factorize (order, symbolic, numbers), inverseDiagonal, dispose",
    "Eigen columns: its analyzePattern + factorize + ten solves' time × order ÷ 10, extrapolated: full-length solves, no use of sparse right-hand sides",
  ],
  *run(options) {
    for (const { family, states, matrix, information } of cases(singleMatrices, options)) {
      const { blockSizes, order } = information;
      const ours = factorize(matrix, { blockSizes });
      const own = measureInTurn(
        {
          "own factor": { run: () => ours.refactor(matrix) },
          inverse: { run: () => ours.inverseDiagonal(), before: () => ours.refactor(matrix) },
        },
        options,
      );
      ours.dispose();
      yield {
        subject: family,
        size: states,
        measure: "selected inverse",
        ours: own.inverse,
        others: { "own factor": own["own factor"] },
        figures: { "÷ factor": own.inverse.median / own["own factor"].median },
      };
      const run = (): void => {
        const fresh = factorize(matrix);
        fresh.inverseDiagonal();
        fresh.dispose();
      };
      const peer = EigenPeer.of(information);
      if (!peer) {
        yield { subject: family, size: states, measure: "diagonal, cold", ours: measureInTurn({ run: { run } }, options).run };
        continue;
      }
      const task = (name: "analyze" | "factor" | "solveTen") => ({ samples: (time: number) => peer.samples(name, time) });
      const { ours: cold, ...parts } = measureInTurn(
        { ours: { run }, analyze: task("analyze"), factor: task("factor"), solveTen: task("solveTen") },
        options,
      );
      const total = parts.analyze.median + parts.factor.median + (parts.solveTen.median * order) / 10;
      yield {
        subject: family,
        size: states,
        measure: "diagonal, cold",
        ours: cold,
        others: { "Eigen columns": scaled(parts.solveTen, total / parts.solveTen.median) },
      };
    }
  },
};
