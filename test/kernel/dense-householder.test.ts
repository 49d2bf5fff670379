import { Matrix, QrDecomposition } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { floatsAt, intoKernel } from "../support/arrays.js";
import { gamma, preciseSum } from "../support/dense-arena.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

/** Runs `triangularize` on a copy laid out with leading dimension `ld`, NaN between the columns. */
function triangularize(m: number, n: number, steps: number, entry: (i: number, j: number) => number, ld = m + 3) {
  const before = new Float64Array(ld * n + 1).fill(Number.NaN);
  for (let j = 0; j < n; j += 1) for (let i = 0; i < m; i += 1) before[1 + i + j * ld] = entry(i, j);
  const address = intoKernel(kernel, before);
  const bytes = kernel.raw.householderScratch!(m, n);
  const scratch = intoKernel(kernel, new Float64Array(bytes / 8 + 1).fill(Number.NaN));
  kernel.raw.triangularize!(m, n, steps, address + 8, ld, scratch);
  const after = floatsAt(kernel, address, before.length);
  const guard = floatsAt(kernel, scratch, bytes / 8 + 1)[bytes / 8];
  kernel.raw.release!(address);
  kernel.raw.release!(scratch);
  expect(guard).toBeNaN();
  for (let k = 0; k < before.length; k += 1) if (Number.isNaN(before[k])) expect(after[k]).toBeNaN();
  return (i: number, j: number) => after[1 + i + j * ld]!;
}

const shapes = [
  ...upTo(8).flatMap((n) => [0, 1, 2, 5].map((more) => [n + 1 + more, n + 1, n + 1] as const)),
  [3, 7, 3],
  [9, 14, 6],
  [40, 33, 33],
  [70, 75, 70],
  [130, 101, 97],
] as const;

test("R is upper triangular with a diagonal that is not negative, and RᵀR is AᵀA in Higham's bound", () => {
  const { uniform } = random(31);
  for (const [m, n, steps] of shapes) {
    const values = upTo(m * n).map(() => 2 * uniform() - 1);
    const a = (i: number, j: number) => values[i + j * m]!;
    const r = triangularize(m, n, steps, a);
    const norms = upTo(n).map((j) => Math.hypot(...upTo(m).map((i) => a(i, j))));
    for (let j = 0; j < steps; j += 1) {
      expect(r(j, j)).toBeGreaterThanOrEqual(0);
      for (let i = j + 1; i < m; i += 1) expect(r(i, j)).toBe(0);
    }
    // A + ΔA = Q·R with ‖Δa_j‖ ≤ γ̃ ‖a_j‖, γ̃ = γ_{c·m·steps} with a small c (Higham, theorem 19.4): twice that for a product of two
    // columns. c = 6 covers the few roundings each entry of a reflection costs, in blocks too (section 19.5).
    for (let j = 0; j < n; j += 1)
      for (let i = 0; i <= j; i += 1) {
        const { sum } = preciseSum(0, [
          ...upTo(m).map((p) => [r(p, i), r(p, j)] as const),
          ...upTo(m).map((p) => [-a(p, i), a(p, j)] as const),
        ]);
        expect(Math.abs(sum)).toBeLessThanOrEqual(2 * gamma(6 * m * steps) * norms[i]! * norms[j]!);
      }
  }
});

test("R agrees with a general library's up to the signs of its rows", () => {
  const { uniform } = random(32);
  for (const [m, n, steps] of shapes) {
    if (steps < n) continue;
    const matrix = Matrix.zeros(m, n);
    for (let j = 0; j < n; j += 1) for (let i = 0; i < m; i += 1) matrix.set(i, j, 2 * uniform() - 1 + (i === j ? n : 0)); // well conditioned
    const r = triangularize(m, n, n, (i, j) => matrix.get(i, j));
    const reference = new QrDecomposition(matrix).upperTriangularMatrix;
    // The condition number is below 10 here; both are near the exact factor to 10·γ̃ ‖A‖ (Higham, section 19.9).
    for (let j = 0; j < n; j += 1)
      for (let i = 0; i <= j; i += 1) {
        const sign = Math.sign(reference.get(i, i));
        expect(Math.abs(r(i, j) - sign * reference.get(i, j))).toBeLessThanOrEqual(20 * gamma(6 * m * n) * matrix.norm());
      }
  }
});

test("columns carried along keep their length and give the least-squares solution", () => {
  // Integer data whose solution is known exactly: y = 3 − 2t + t² on t = 0 … 9, plus a residual orthogonal to every quadratic (the cubic orthogonal polynomial for ten points: Fisher, Yates, Statistical Tables, table XXIII, from memory).
  const cubic = [-42, 14, 35, 31, 12, -12, -31, -35, -14, 42];
  const r = triangularize(10, 4, 3, (i, j) => (j < 3 ? i ** j : 3 - 2 * i + i * i + cubic[i]!));
  const x = [0, 0, 0];
  for (let j = 2; j >= 0; j -= 1)
    x[j] =
      (r(j, 3) -
        upTo(3)
          .filter((p) => p > j)
          .reduce((sum, p) => sum + r(j, p) * x[p]!, 0)) /
      r(j, j);
  // κ₂ of the quadratic on 0 … 9 is 107, taken as 140; forward error ≤ about 2·κ·γ̃·(‖x‖ + κ ‖residual‖ ÷ ‖A‖) (Higham, theorem 20.1).
  const bound = 2 * 140 * gamma(6 * 10 * 3) * (4 + (140 * 93) / 124);
  for (const [j, exact] of [3, -2, 1].entries()) expect(Math.abs(x[j]! - exact)).toBeLessThanOrEqual(bound);
  const residual = Math.hypot(...upTo(7).map((i) => r(3 + i, 3)));
  expect(Math.abs(residual - Math.sqrt(8580))).toBeLessThanOrEqual(bound); // Σ of the squares of the cubic's values
});

test("zero columns and repeated columns give zero or tiny pivots, never NaN", () => {
  const r = triangularize(6, 4, 4, (i, j) => (j === 1 ? 0 : j === 3 ? 2 * (i + 1) : i + 1 + j));
  for (let j = 0; j < 4; j += 1) for (let i = 0; i < 6; i += 1) expect(Number.isFinite(r(i, j))).toBe(true);
  expect(r(1, 1)).toBe(0);
  expect(r(3, 3)).toBeLessThanOrEqual(gamma(6 * 6 * 4) * Math.hypot(2, 4, 6, 8, 10, 12)); // column 3 is twice column 0
});
