// GFlop/s (and µs) of the dense kernels by size, beside the multiply-add peak measured in the same run.
//   node bench/dense.mjs [plain|fused] [name …]      fused wants node --experimental-wasm-relaxed-simd
// Each figure is the best of 60 short repeats, so that other work on the machine falls between them; loops run inside the module. Leading dimensions are even.
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import asc from "assemblyscript/asc";

const [build = "plain", ...only] = process.argv.slice(2);
const features = build === "fused" ? "simd,relaxed-simd" : "simd";
const folder = mkdtempSync(join(tmpdir(), "dense-"));
const file = join(folder, "loops.wasm");
const options = "--config none --runtime stub --importMemory --initialMemory 16 --maximumMemory 65535 --noAssert -O3 --converge";
const { error, stderr } = await asc.main(["assembly/bench/dense-loops.ts", ...options.split(" "), "--enable", features, "-o", file]);
if (error) throw new Error(String(stderr));
const memory = new WebAssembly.Memory({ initial: 16, maximum: 65535 });
const { instance } = await WebAssembly.instantiate(readFileSync(file), { env: { memory, abort: () => {} } });
rmSync(folder, { recursive: true });
const kernel = instance.exports;

let seed = 1;
const uniform = () => {
  seed = (Math.imul(seed, 1664525) + 1013904223) >>> 0; // Numerical Recipes' generator is enough for timing
  return seed / 2 ** 32 - 0.5;
};
const even = (n) => n + (n & 1);
const matrix = (rows, cols, diagonal = 0) => {
  const ld = even(rows);
  const address = kernel.allocate(8 * ld * cols + 64) >>> 0;
  const values = new Float64Array(memory.buffer, address, ld * cols);
  for (let k = 0; k < values.length; k += 1) values[k] = uniform();
  if (diagonal) for (let j = 0; j < cols; j += 1) values[j + j * ld] = diagonal;
  return address;
};
/** Milliseconds of one round of `run(times)`. */
const time = (run) => {
  let times = 1;
  for (let warm = performance.now(); performance.now() - warm < 5; ) run(1); // past the baseline compiler
  for (; ; times *= 2) {
    const start = performance.now();
    run(times);
    if (performance.now() - start > 0.7) break;
  }
  let best = Number.POSITIVE_INFINITY;
  for (let repeat = 0; repeat < 60; repeat += 1) {
    const start = performance.now();
    run(times);
    best = Math.min(best, (performance.now() - start) / times);
  }
  return best;
};
const report = (name, shapes, prepare) => {
  if (only.length && !only.some((part) => name.includes(part))) return;
  console.log(name);
  for (const shape of shapes) {
    const { addresses, run, flops, apart } = prepare(...[shape].flat());
    const ms = time(run) - (apart ? time(apart) : 0);
    const rate = (flops / ms) * 1e-6;
    console.log(
      `  ${[shape].flat().join(" × ").padEnd(16)} ${rate.toFixed(1).padStart(6)} GFlop/s  ${(ms * 1e3).toPrecision(3).padStart(8)} µs  ${((100 * rate) / peak).toFixed(0).padStart(3)} %`,
    );
    for (const address of addresses) kernel.release(address);
  }
};

kernel.peak(1e6);
const peak = (48 / time((times) => kernel.peak(times))) * 1e-6;
console.log(`${build}, node ${process.version}: peak ${peak.toFixed(1)} GFlop/s`);

const squares = [2, 3, 4, 6, 12, 24, 48, 96, 192, 384, 768];
const shapes = [
  [10, 2, 2], [10, 3, 3], [30, 2, 2], [30, 3, 3], [60, 3, 3], [12, 6, 6], [30, 6, 6], [60, 6, 6], [60, 12, 12], [60, 12, 48],
  [3, 60, 3], [6, 60, 6], [200, 48, 48], [1000, 96, 96],
]; // biome-ignore format: a table
const product =
  (layout) =>
  (m, n = m, k = m) => {
    const [a, b, c] = [matrix(m, k), matrix(Math.max(n, k), Math.max(n, k)), matrix(m, n)];
    const ldb = even(Math.max(n, k));
    const [bRow, bCol] = layout === "B" ? [1, ldb] : [ldb, 1];
    const run = (times) => kernel.multiplyTimes(times, m, n, k, a, even(m), b, bRow, bCol, c, even(m), 2);
    return { addresses: [a, b, c], run, flops: 2 * m * n * k };
  };
report("multiply, B by columns", squares, product("B"));
report("multiply, B transposed", squares, product("T"));
report("multiply shapes, B by columns", shapes, product("B"));
report("multiply shapes, B transposed", shapes, product("T"));
report("multiplyTransposed", [...squares, ...shapes], (m, n = m, k = m) => {
  const [a, b, c] = [matrix(k, m), matrix(k, n), matrix(m, n)];
  const run = (times) => kernel.multiplyTransposedTimes(times, m, n, k, a, even(k), b, even(k), c, even(m), 2);
  return { addresses: [a, b, c], run, flops: 2 * m * n * k };
});
report(
  "triangle of AᵀB",
  [
    [3, 3],
    [3, 30],
    [6, 6],
    [6, 60],
    [12, 60],
    [48, 200],
    [192, 192],
  ],
  (w, m) => {
    // biome-ignore format: a table
    const [a, b, c] = [matrix(m, w), matrix(m, w), matrix(w, w)];
    const run = (times) => kernel.multiplyTransposedLowerTimes(times, w, m, a, even(m), b, even(m), c, even(w), 2);
    return { addresses: [a, b, c], run, flops: w * (w + 1) * m };
  },
);
report("rankUpdateLower", [...squares, [10, 3], [30, 3], [60, 6], [60, 12], [300, 96]], (n, k = n) => {
  const [a, c] = [matrix(n, k), matrix(n, n)];
  const run = (times) => kernel.rankUpdateTimes(times, n, k, a, even(n), c, even(n), 2);
  return { addresses: [a, c], run, flops: n * (n + 1) * k };
});
const panels = [[3, 1], [4, 2], [9, 3], [12, 2], [30, 3], [12, 6], [30, 6], [60, 12], [100, 24], [300, 96], [1000, 384]]; // biome-ignore format: a table
report(
  "factorPanel, less the copy of its input",
  [...squares.slice(0, 1), 3, 6, 12, 24, 48, 96, 192, 384, 768, ...panels],
  (rows, width = rows) => {
    const [source, panel, floors] = [matrix(rows, width, width + 1), matrix(rows, width), matrix(width, 1)];
    new Float64Array(memory.buffer, floors, width).fill(0);
    const run = (times) => {
      if (kernel.factorTimes(times, rows, width, source, panel, even(rows), floors)) throw new Error("a pivot failed");
    };
    const apart = (times) => kernel.copyTimes(times, width, source, panel, even(rows));
    return { addresses: [source, panel, floors], run, apart, flops: width ** 3 / 3 + width ** 2 / 2 + (rows - width) * width ** 2 };
  },
);
for (const transposed of [1, 0])
  report(
    `solveRight${transposed ? "Transposed" : ""}`,
    [
      [3, 3],
      [20, 3],
      [20, 6],
      [60, 12],
      [200, 48],
      [400, 192],
    ],
    (m, w) => {
      // biome-ignore format: a table
      const [l, b] = [matrix(w, w, 1), matrix(m, w)];
      new Float64Array(memory.buffer, b, even(m) * w).fill(0); // repeated solves must not grow
      const run = (times) => kernel.solveRightTimes(times, transposed, m, w, l, even(w), b, even(m));
      return { addresses: [l, b], run, flops: m * w * w };
    },
  );
for (const transposed of [0, 1])
  report(
    `solveLower${transposed ? "Transposed" : ""}Many`,
    [
      [3, 4],
      [6, 6],
      [12, 12],
      [48, 4],
      [48, 48],
      [192, 48],
    ],
    (w, n) => {
      // biome-ignore format: a table
      const [l, x] = [matrix(w, w, 1), matrix(w, n)];
      new Float64Array(memory.buffer, x, even(w) * n).fill(0);
      const run = (times) => kernel.solveLeftTimes(times, transposed, w, n, l, even(w), x, even(w));
      return { addresses: [l, x], run, flops: w * w * n };
    },
  );
report("inverseOfProduct", [2, 3, 4, 6, 12, 24, 48, 96, 192, 384], (w) => {
  const [l, z, scratch] = [matrix(w, w, 2), matrix(w, w), matrix(w, w + 8)];
  const run = (times) => kernel.inverseTimes(times, w, l, even(w), z, even(w), scratch);
  return { addresses: [l, z, scratch], run, flops: (2 / 3) * w ** 3 };
});
for (const backward of [0, 1])
  report(
    `one right-hand side, ${backward ? "backward" : "forward"}`,
    [
      [3, 1],
      [9, 3],
      [30, 3],
      [30, 6],
      [60, 12],
      [300, 96],
    ],
    (rows, w) => {
      // biome-ignore format: a table
      const [panel, x] = [matrix(rows, w, 1), matrix(rows, 1)];
      new Float64Array(memory.buffer, x, rows).fill(0);
      const run = (times) => kernel.vectorTimes(times, backward, rows, w, panel, even(rows), x);
      return { addresses: [panel, x], run, flops: w * w + 2 * (rows - w) * w };
    },
  );
report(
  "triangularize, less the copy of its input",
  [
    [6, 3],
    [12, 6],
    [30, 6],
    [30, 12],
    [60, 24],
    [100, 48],
    [200, 96],
    [400, 192],
    [1000, 384],
  ],
  (m, n) => {
    // biome-ignore format: a table
    const [source, a, scratch] = [matrix(m, n), matrix(m, n), matrix(m + 2 * n + 40, 34)];
    const run = (times) => kernel.triangularizeTimes(times, m, n, source, a, even(m), scratch);
    const apart = (times) => kernel.copyTimes(times, n, source, a, even(m));
    return { addresses: [source, a, scratch], run, apart, flops: 2 * n * n * (m - n / 3) };
  },
);
