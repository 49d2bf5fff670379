import { Matrix, QrDecomposition } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { floatsAt, intoKernel, intsAt } from "../support/arrays.js";
import { gamma, preciseSum } from "../support/dense-arena.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

interface Triangle {
  /** Rows of R, and the columns at which they begin. */
  rows: number;
  leads: number[];
  /** Entry of R, zero before its row begins; what is carried comes after the columns. */
  r(i: number, j: number): number;
  /** Carried entry c of a row that gave no row of R. */
  rest: number[];
}

/** Runs `triangularize` on rows sorted by where they begin, in pieces of `piece` columns, NaN around the rows. */
function triangularize(given: readonly (readonly number[])[], columns: number, piece = columns): Triangle {
  const begins = (row: readonly number[]) => {
    const at = row.findIndex((v) => v !== 0);
    return at < 0 || at >= columns ? columns - 1 : at;
  };
  const rows = [...given].sort((a, b) => begins(a) - begins(b));
  const width = rows[0]?.length ?? columns;
  const ld = width + (width & 1);
  const before = new Float64Array(ld * rows.length + 2).fill(Number.NaN);
  for (const [i, row] of rows.entries()) for (let j = 0; j < ld; j += 1) before[1 + i * ld + j] = row[j] ?? 0;
  const ends = Int32Array.from({ length: columns }, (_, j) => rows.filter((row) => begins(row) <= j).length);
  const address = intoKernel(kernel, before);
  const endsAt = intoKernel(kernel, ends);
  const leadsAt = intoKernel(kernel, new Int32Array(rows.length + 1).fill(-7));
  const bytes = kernel.raw.householderScratch!(rows.length);
  const scratch = intoKernel(kernel, new Float64Array(bytes / 8 + 1).fill(Number.NaN));
  let done = 0;
  for (let from = 0; from < columns; from += piece) {
    const to = Math.min(from + piece, columns);
    done = kernel.raw.triangularize!(columns, address + 8, ld, endsAt, from, to, done, leadsAt, scratch);
  }
  const after = floatsAt(kernel, address, before.length);
  const leads = [...intsAt(kernel, leadsAt, rows.length + 1)];
  const guard = floatsAt(kernel, scratch, bytes / 8 + 1)[bytes / 8];
  for (const block of [address, endsAt, leadsAt, scratch]) kernel.raw.release!(block);
  expect(guard).toBeNaN();
  expect(after[0]).toBeNaN();
  expect(after[after.length - 1]).toBeNaN();
  expect(leads.slice(done).every((lead) => lead === -7)).toBe(true);
  return {
    rows: done,
    leads: leads.slice(0, done),
    r: (i, j) => (i >= done || (j < columns && j < leads[i]!) ? 0 : after[1 + i * ld + j]!),
    rest: upTo(rows.length - done).map((k) => after[1 + (done + k) * ld + columns]!),
  };
}

const { uniform } = random(31);
const entry = () => 2 * uniform() - 1;
/** Random rows; with `steps`, row i begins at column floor(i · steps ÷ m). */
const staircase = (m: number, n: number, steps = 0): number[][] =>
  upTo(m).map((i) => upTo(n).map((j) => (j < Math.floor((i * steps) / m) ? 0 : entry())));

const shapes = [
  ...upTo(9).flatMap((n) => [0, 1, 2, 5].map((more) => [n + 1 + more, n + 1, 0] as const)),
  [3, 7, 0],
  [7, 9, 9],
  [9, 14, 6],
  [40, 33, 33],
  [70, 75, 40],
  [130, 101, 97],
  [6, 30, 27],
] as const;

test("rows of R begin one after another, and RᵀR is AᵀA in Higham's bound, however the columns are cut", () => {
  for (const [m, n, steps] of shapes) {
    const a = staircase(m, n, steps);
    const { r, rows, leads } = triangularize(a, n);
    const sliced = triangularize(a, n, 8);
    expect(sliced.leads).toEqual(leads);
    for (let i = 1; i < rows; i += 1) expect(leads[i]!).toBeGreaterThan(leads[i - 1]!);
    const norms = upTo(n).map((j) => Math.hypot(...a.map((row) => row[j]!)));
    // A + ΔA = Q·R with ‖Δa_j‖ ≤ γ̃ ‖a_j‖, γ̃ = γ_{c·m·n} with a small c (Higham, theorem 19.4): twice that for a product of two
    // columns. c = 6 covers the few roundings each entry of a reflection costs, in blocks too (section 19.5).
    for (let j = 0; j < n; j += 1)
      for (let i = 0; i <= j; i += 1) {
        const { sum } = preciseSum(0, [
          ...upTo(rows).map((p) => [r(p, i), r(p, j)] as const),
          ...upTo(m).map((p) => [-a[p]![i]!, a[p]![j]!] as const),
        ]);
        expect(Math.abs(sum)).toBeLessThanOrEqual(2 * gamma(6 * m * n) * norms[i]! * norms[j]!);
        expect(sliced.r(i, j)).toBe(r(i, j));
      }
  }
});

test("R agrees with a general library's up to the signs of its rows", () => {
  for (const [m, n] of shapes) {
    if (m < n) continue;
    const matrix = Matrix.zeros(m, n);
    for (let j = 0; j < n; j += 1) for (let i = 0; i < m; i += 1) matrix.set(i, j, entry() + (i === j ? n : 0)); // well conditioned
    const { r, leads } = triangularize(matrix.to2DArray(), n);
    expect(leads).toEqual(upTo(n));
    const reference = new QrDecomposition(matrix).upperTriangularMatrix;
    // The condition number is below 10 here; both are near the exact factor to 10·γ̃ ‖A‖ (Higham, section 19.9).
    for (let i = 0; i < n; i += 1) {
      const sign = Math.sign(reference.get(i, i)) * Math.sign(r(i, i));
      for (let j = i; j < n; j += 1)
        expect(Math.abs(r(i, j) - sign * reference.get(i, j))).toBeLessThanOrEqual(20 * gamma(6 * m * n) * matrix.norm());
    }
  }
});

test("columns carried along keep their length and give the least-squares solution", () => {
  // Integer data whose solution is known exactly: y = 3 − 2t + t² on t = 0 … 9, plus a residual orthogonal to every quadratic (the cubic orthogonal polynomial for ten points: Fisher, Yates, Statistical Tables, table XXIII, from memory).
  const cubic = [-42, 14, 35, 31, 12, -12, -31, -35, -14, 42];
  const { r, rest } = triangularize(
    cubic.map((c, i) => [1, i, i * i, 3 - 2 * i + i * i + c]),
    3,
  );
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
  expect(Math.abs(Math.hypot(...rest) - Math.sqrt(8580))).toBeLessThanOrEqual(bound); // Σ of the squares of the cubic's values
});

test("a column of zeros gives no row, a repeated one at most a tiny one, never NaN", () => {
  const { r, rows, leads } = triangularize(
    upTo(6).map((i) => [i + 1, 0, i + 3, 2 * (i + 1)]),
    4,
  );
  for (let j = 0; j < 4; j += 1) for (let i = 0; i < rows; i += 1) expect(Number.isFinite(r(i, j))).toBe(true);
  expect(leads.slice(0, 2)).toEqual([0, 2]);
  if (rows === 3) expect(Math.abs(r(2, 3))).toBeLessThanOrEqual(gamma(6 * 6 * 4) * Math.hypot(2, 4, 6, 8, 10, 12)); // column 3 is twice column 0
});

test("small rows keep their digits beside large ones", () => {
  // Two unknowns: their difference by rows of size 10¹⁰, their sum by rows of size 1, small rows first (Powell, Reid 1969: with a small row in
  // the pivot's place it would be lost). R₁₁ ÷ R₀₀ of exact arithmetic: AᵀA = g [1 −1; −1 1] + h [1 1; 1 1], g = 2·10²⁰, h = 2.
  const large = 1e10;
  const { r } = triangularize(
    [
      [1, 1],
      [1, 1],
      [large, -large],
      [large, -large],
    ],
    2,
  );
  // R₁₁² = 4 g h ÷ (g + h): 8 to within 2e-20. What is left of the second large row is some roundings of its own size, and enters by its square.
  expect(Math.abs(r(1, 1) ** 2 - 8)).toBeLessThan(1e-14 + (4 * Number.EPSILON * large) ** 2);
});
