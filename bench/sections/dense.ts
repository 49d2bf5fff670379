// The dense kernels by size, in loops inside the module, beside the multiply-add peak and OpenBLAS (serial).
import { loops, loopsMemory } from "../harness/loops.js";
import { openblas } from "../harness/native.js";
import { peakRate } from "../harness/peak.js";
import type { Row, Section } from "../harness/report.js";
import { measure, scaled } from "../harness/timing.js";

/** One call of a kernel on blocks in its memory. */
interface Prepared {
  readonly blocks: readonly number[];
  run(times: number): void;
  readonly flops: number;
}
interface Piece {
  readonly name: string;
  /** Which of OpenBLAS's timings it is compared with, on squares. */
  readonly peer?: "product" | "rankUpdate" | "cholesky";
  readonly shapes: readonly (readonly number[])[];
  prepare(...shape: number[]): Prepared;
}

/** Leading dimensions are even, as in the factor's panels. */
const even = (n: number): number => n + (n & 1);

function matrix(rows: number, columns: number, diagonal = 0): number {
  const ld = even(rows);
  const address = loops().allocate!(8 * ld * columns + 64) >>> 0;
  const values = new Float64Array(loopsMemory().buffer, address, ld * columns);
  for (let k = 0; k < values.length; k += 1) values[k] = ((k * 7919) % 101) / 101 - 0.5;
  if (diagonal) for (let j = 0; j < columns; j += 1) values[j + j * ld] = diagonal;
  return address;
}
/** A block of zeros: repeated solves on it stay finite. */
function zeros(rows: number, columns: number): number {
  const address = matrix(rows, columns);
  new Float64Array(loopsMemory().buffer, address, even(rows) * columns).fill(0);
  return address;
}

/** C = C + A B, modes as in assembly/dense/mode.ts. */
const ADD = 2;
const squares = [2, 3, 4, 6, 12, 24, 48, 96, 192, 384, 768].map((n) => [n, n, n]);
// biome-ignore format: a table
const products = [
  [10, 2, 2], [10, 3, 3], [30, 2, 2], [30, 3, 3], [60, 3, 3], [12, 6, 6], [30, 6, 6], [60, 6, 6], [60, 12, 12], [60, 12, 48],
  [3, 60, 3], [6, 60, 6], [200, 48, 48], [1000, 96, 96],
];
// biome-ignore format: a table
const panels = [[3, 1], [4, 2], [9, 3], [12, 2], [30, 3], [12, 6], [30, 6], [60, 12], [100, 24], [300, 96], [1000, 384]];

const product =
  (transposed: boolean) =>
  (m: number, n: number, k: number): Prepared => {
    const ldb = even(Math.max(n, k));
    const [a, b, c] = [matrix(m, k), matrix(ldb, ldb), matrix(m, n)];
    const [bRow, bCol] = transposed ? [ldb, 1] : [1, ldb];
    return {
      blocks: [a, b, c],
      run: (times) => loops().multiplyTimes!(times, m, n, k, a, even(m), b, bRow, bCol, c, even(m), ADD),
      flops: 2 * m * n * k,
    };
  };

const pieces: readonly Piece[] = [
  { name: "A B", peer: "product", shapes: [...squares, ...products], prepare: product(false) },
  { name: "A Bᵀ", shapes: [...squares, ...products], prepare: product(true) },
  {
    name: "Aᵀ B",
    shapes: [...squares, ...products],
    prepare: (m, n, k) => {
      const [a, b, c] = [matrix(k, m), matrix(k, n), matrix(m, n)];
      const run = (times: number) => loops().multiplyTransposedTimes!(times, m, n, k, a, even(k), b, even(k), c, even(m), ADD);
      return { blocks: [a, b, c], run, flops: 2 * m * n * k };
    },
  },
  {
    name: "half of Aᵀ B",
    // biome-ignore format: a table
    shapes: [[3, 3], [3, 30], [6, 6], [6, 60], [12, 60], [48, 200], [192, 192]],
    prepare: (w, m) => {
      const [a, b, c] = [matrix(m, w), matrix(m, w), matrix(w, w)];
      const run = (times: number) => loops().multiplyTransposedLowerTimes!(times, w, m, a, even(m), b, even(m), c, even(w), ADD);
      return { blocks: [a, b, c], run, flops: w * (w + 1) * m };
    },
  },
  {
    name: "half of A Aᵀ",
    peer: "rankUpdate",
    shapes: [...squares.map(([n]) => [n!, n!]), [10, 3], [30, 3], [60, 6], [60, 12], [300, 96]],
    prepare: (n, k) => {
      const [a, c] = [matrix(n, k), matrix(n, n)];
      const run = (times: number) => loops().rankUpdateTimes!(times, n, k, a, even(n), c, even(n), ADD);
      return { blocks: [a, c], run, flops: n * (n + 1) * k };
    },
  },
  {
    name: "factor, with copy",
    peer: "cholesky",
    shapes: [...squares.map(([n]) => [n!, n!]), ...panels],
    prepare: (rows, width) => {
      const [source, panel, floors] = [matrix(rows, width, width + 1), matrix(rows, width), zeros(width, 1)];
      const run = (times: number) => {
        if (loops().factorTimes!(times, rows, width, source, panel, even(rows), floors)) throw new Error("a pivot failed");
      };
      return { blocks: [source, panel, floors], run, flops: width ** 3 / 3 + width ** 2 / 2 + (rows - width) * width ** 2 };
    },
  },
  ...[false, true].map(
    (transposed): Piece => ({
      name: transposed ? "B L⁻ᵀ" : "B L⁻¹",
      // biome-ignore format: a table
      shapes: [[3, 3], [20, 3], [20, 6], [60, 12], [200, 48], [400, 192]],
      prepare: (m, w) => {
        const [l, b] = [matrix(w, w, 1), zeros(m, w)];
        const run = (times: number) => loops().solveRightTimes!(times, Number(transposed), m, w, l, even(w), b, even(m));
        return { blocks: [l, b], run, flops: m * w * w };
      },
    }),
  ),
  ...[false, true].map(
    (transposed): Piece => ({
      name: transposed ? "L⁻ᵀ B" : "L⁻¹ B",
      // biome-ignore format: a table
      shapes: [[3, 4], [6, 6], [12, 12], [48, 4], [48, 48], [192, 48]],
      prepare: (w, n) => {
        const [l, x] = [matrix(w, w, 1), zeros(w, n)];
        const run = (times: number) => loops().solveLeftTimes!(times, Number(transposed), w, n, l, even(w), x, even(w));
        return { blocks: [l, x], run, flops: w * w * n };
      },
    }),
  ),
  {
    name: "(L Lᵀ)⁻¹",
    shapes: [2, 3, 4, 6, 12, 24, 48, 96, 192, 384].map((w) => [w]),
    prepare: (w) => {
      const [l, z, scratch] = [matrix(w, w, 2), matrix(w, w), matrix(w, w + 8)];
      const run = (times: number) => loops().inverseTimes!(times, w, l, even(w), z, even(w), scratch);
      return { blocks: [l, z, scratch], run, flops: (2 / 3) * w ** 3 };
    },
  },
  ...[false, true].map(
    (backward): Piece => ({
      name: backward ? "panel, backward" : "panel, forward",
      // biome-ignore format: a table
      shapes: [[3, 1], [9, 3], [30, 3], [30, 6], [60, 12], [300, 96]],
      prepare: (rows, w) => {
        const [panel, x] = [matrix(rows, w, 1), zeros(rows, 1)];
        const run = (times: number) => loops().vectorTimes!(times, Number(backward), rows, w, panel, even(rows), x);
        return { blocks: [panel, x], run, flops: w * w + 2 * (rows - w) * w };
      },
    }),
  ),
];

/** Repeats inside one sample, so that it lasts longer than the clock is coarse. */
function repeats(run: (times: number) => void): number {
  for (let times = 1; ; times *= 2) {
    const start = performance.now();
    run(times);
    if (performance.now() - start > 0.7) return times;
  }
}
export const dense: Section = {
  name: "dense",
  timers: [
    "each piece: a loop of calls inside the kernel's module on blocks that stay in cache where they fit, leading dimensions even",
    "OpenBLAS: dgemm, dsyrk, dpotrf (with the copy it destroys), its serial build, one thread",
    "share of peak: ÷ the multiply-add peak of WebAssembly in this run",
  ],
  *run({ quick, time }) {
    const short = time / 7;
    const peak = peakRate(time);
    const squareSizes = squares.map(([n]) => n!).filter((n) => !quick || n <= 192);
    const peers = openblas(squareSizes, short);
    for (const { name, peer, shapes, prepare } of pieces) {
      for (const shape of shapes) {
        const size = shape[0]!;
        if (quick && (!peer || size > 192)) continue;
        const { blocks, run, flops } = prepare(...shape);
        run(1);
        const times = repeats(run);
        const ours = scaled(
          measure(() => run(times), { time: short }),
          1 / times,
        );
        for (const block of blocks) loops().release!(block);
        const rate = flops / ours.median / 1e6;
        const square = shape.every((n) => n === size);
        const other = peer && square ? peers.get(size)?.[peer] : undefined;
        const row: Row = {
          subject: name,
          size,
          measure: shape.join(" × "),
          ours,
          ...(other && { others: { OpenBLAS: other } }),
          figures: { "GFlop/s": rate, "share of peak": rate / peak },
        };
        yield row;
      }
    }
  },
};
