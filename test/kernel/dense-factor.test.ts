import { inverse, Matrix } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { Arena, gamma, preciseSum } from "../support/dense-arena.js";
import * as twins from "../support/dense-twins.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);
const odd = (rows: number) => rows + 1 - (rows & 1);
/** [rows, width] of panels: all small ones, and some past the block sizes. */
const panels = [
  ...upTo(9).flatMap((w) => [0, 1, 2, 3, 4, 5, 9].map((more) => [w + 1 + more, w + 1] as const)),
  [23, 14],
  [121, 101],
  [260, 203],
] as const;

/** A panel whose top square is dominated by its diagonal, hence definite. */
function definitePanel(arena: Arena, rows: number, width: number, ld: number): number {
  const panel = arena.trapezoid(rows, width, ld);
  for (let j = 0; j < width; j += 1) arena.values[panel + j + j * ld]! += width;
  return panel;
}

test("factorPanel equals its twin however the columns are cut, and its residual is in Higham's bound", () => {
  const uniform = random(21).uniform;
  for (const [rows, width] of panels) {
    const ld = odd(rows);
    const arena = new Arena(kernel, (ld + 2) * (width + 1) + 20, uniform);
    const panel = definitePanel(arena, rows, width, ld);
    const floors = arena.matrix(width, 1, width);
    arena.values.fill(0, floors, floors + width);
    for (const cut of new Set([0, 1, Math.floor(width / 3), width])) {
      const result = arena.agree(
        (raw, at) =>
          raw.factorPanel!(rows, width, at(panel), ld, at(floors), 0, cut) ||
          raw.factorPanel!(rows, width, at(panel), ld, at(floors), cut, width),
        (v) => twins.factorPanel(v, rows, width, panel, ld, floors),
      );
      if (width > 110) continue;
      // |A − L Lᵀ| ≤ γ_{n+1} |L||Lᵀ| (Higham, theorem 10.3); four roundings more for √p·(1 ÷ p) and the product with it.
      for (let j = 0; j < width; j += 1)
        for (let i = j; i < rows; i += 1) {
          const l = (r: number, p: number) => result.at(panel + r + p * ld);
          const { sum, magnitude } = preciseSum(
            -arena.values[panel + i + j * ld]!,
            upTo(j + 1).map((p) => [l(i, p), l(j, p)] as const),
          );
          expect(Math.abs(sum)).toBeLessThanOrEqual(gamma(width + 5) * magnitude);
        }
    }
    arena.dispose();
  }
});

test("factorPanel names the first pivot that is not above its floor, or not a number", () => {
  const uniform = random(22).uniform;
  for (const width of [1, 2, 3, 4, 5, 7, 30, 101])
    for (const bad of new Set([0, 1, 2, 3, width >> 1, width - 1].filter((j) => j < width))) {
      const ld = odd(width + 2);
      for (const spoil of ["negative", "floor", "not a number", "too small", "too large"]) {
        const arena = new Arena(kernel, (ld + 2) * (width + 1) + 20, uniform);
        const panel = definitePanel(arena, width + 2, width, ld);
        const floors = arena.matrix(width, 1, width);
        arena.values.fill(0, floors, floors + width);
        if (spoil === "floor") arena.values[floors + bad] = 1e6;
        else
          arena.values[panel + bad + bad * ld] = { negative: -1, "not a number": Number.NaN, "too small": 1e-310, "too large": 1e308 }[
            spoil
          ]!;
        const base = kernel.raw.allocate!(8 * arena.values.length) >>> 0;
        new Float64Array(kernel.memory.buffer, base, arena.values.length).set(arena.values);
        expect(kernel.raw.factorPanel!(width + 2, width, base + 8 * panel, ld, base + 8 * floors, 0, width)).toBe(1 + bad);
        kernel.raw.release!(base);
        arena.dispose();
      }
    }
});

/** [m, w] of right-hand sides and triangles. */
const systems = [...upTo(9).flatMap((m) => upTo(9).map((w) => [m, w + 1] as const)), [31, 103], [100, 13]] as const;
/** A triangle whose solves do not grow: off the diagonal at most 1 ÷ w. */
function tameTriangle(arena: Arena, w: number, ld: number): number {
  const l = arena.trapezoid(w, w, ld);
  for (let j = 0; j < w; j += 1) for (let i = j + 1; i < w; i += 1) arena.values[l + i + j * ld]! /= w;
  return l;
}

test("the solves from the right equal their twins, and each row solves a system near its own", () => {
  const uniform = random(23).uniform;
  for (const [m, w] of systems) {
    const [ldl, ldb] = [odd(w), odd(m) + 2];
    const arena = new Arena(kernel, (ldl + 3) * (w + 1) + (ldb + 3) * w + 20, uniform);
    const [l, b] = [tameTriangle(arena, w, ldl), arena.matrix(m, w, ldb)];
    for (const [name, twin] of [
      ["solveRightTransposed", twins.solveRightTransposed],
      ["solveRight", twins.solveRight],
    ] as const) {
      const result = arena.agree(
        (raw, at) => raw[name]!(m, w, at(l), ldl, at(b), ldb),
        (v) => twin(v, m, w, l, ldl, b, ldb) as undefined,
      );
      // |b − x Lᵀ| ≤ γ_w |x||Lᵀ| (Higham, theorem 8.5); two roundings more for the reciprocal.
      for (let i = 0; i < m; i += 1)
        for (let j = 0; j < w; j += 1) {
          const coefficient = (p: number) => arena.values[name === "solveRight" ? l + p + j * ldl : l + j + p * ldl]!;
          const known = upTo(w).filter((p) => (name === "solveRight" ? p >= j : p <= j));
          const { sum, magnitude } = preciseSum(
            -arena.values[b + i + j * ldb]!,
            known.map((p) => [result.at(b + i + p * ldb), coefficient(p)] as const),
          );
          expect(Math.abs(sum)).toBeLessThanOrEqual(gamma(w + 2) * magnitude);
        }
    }
    arena.dispose();
  }
});

test("the solves from the left equal their twins, and each column solves a system near its own", () => {
  const uniform = random(24).uniform;
  for (const [n, w] of systems) {
    const [ld, ldx] = [odd(w) + 2, odd(w)];
    const arena = new Arena(kernel, (ld + 3) * (w + 1) + (ldx + 3) * (n + 2) + 20, uniform);
    const [l, x] = [tameTriangle(arena, w, ld), arena.matrix(w, n + 1, ldx)];
    const check = (result: twins.Cells, columns: number, transposed: boolean) => {
      for (let j = 0; j < columns; j += 1)
        for (let i = 0; i < w; i += 1) {
          const terms = upTo(w)
            .filter((p) => (transposed ? p >= i : p <= i))
            .map((p) => [arena.values[transposed ? l + p + i * ld : l + i + p * ld]!, result.at(x + p + j * ldx)] as const);
          const { sum, magnitude } = preciseSum(-arena.values[x + i + j * ldx]!, terms);
          expect(Math.abs(sum)).toBeLessThanOrEqual(gamma(w + 1) * magnitude); // Higham, theorem 8.5
        }
    };
    for (const [name, twin] of [
      ["solveLowerMany", twins.solveLowerMany],
      ["solveLowerTransposedMany", twins.solveLowerTransposedMany],
    ] as const) {
      const result = arena.agree(
        (raw, at) => raw[name]!(w, n, at(l), ld, at(x), ldx),
        (v) => twin(v, w, n, l, ld, x, ldx) as undefined,
      );
      check(result, n, name === "solveLowerTransposedMany");
    }
    for (const [name, twin] of [
      ["solveLower", twins.solveLower],
      ["solveLowerTransposed", twins.solveLowerTransposed],
    ] as const) {
      const result = arena.agree(
        (raw, at) => raw[name]!(w, at(l), ld, at(x)),
        (v) => twin(v, w, l, ld, x) as undefined,
      );
      check(result, 1, name === "solveLowerTransposed");
    }
    arena.dispose();
  }
});

test("inverseOfProduct is symmetric, agrees with a general library, keeps L and touches nothing else", () => {
  const uniform = random(25).uniform;
  for (const w of [...upTo(18), 31, 50, 101]) {
    const [ldl, ldz] = [odd(w), odd(w) + 2];
    const scratch = kernel.raw.inverseScratch!(w) / 8;
    const arena = new Arena(kernel, (ldl + 3) * (w + 1) + (ldz + 3) * (w + 1) + scratch + 20, uniform);
    const [l, z, s] = [tameTriangle(arena, w, ldl), arena.empty(w, w, ldz), arena.empty(scratch, 1, scratch)];
    const lower = Matrix.zeros(w, w);
    for (let j = 0; j < w; j += 1) for (let i = j; i < w; i += 1) lower.set(i, j, arena.values[l + i + j * ldl]!);
    if (w === 0) {
      arena.agree(
        (raw, at) => raw.inverseOfProduct!(0, at(l), ldl, at(z), ldz, at(s)),
        () => undefined,
      );
      arena.dispose();
      continue;
    }
    const product = lower.mmul(lower.transpose());
    const reference = inverse(product);
    const before = arena.values.slice();
    const base = kernel.raw.allocate!(8 * before.length) >>> 0;
    new Float64Array(kernel.memory.buffer, base, before.length).set(before);
    kernel.raw.inverseOfProduct!(w, base + 8 * l, ldl, base + 8 * z, ldz, base + 8 * s);
    const after = new Float64Array(kernel.memory.buffer, base, before.length).slice();
    // Both inverses are within c·w·κ·u of the exact one, normwise (Higham, section 14.1), c = 10 with room for the cuts.
    const tolerance = 20 * w * 2 ** -53 * product.norm() * reference.norm() * reference.norm();
    const touched = new Set<number>();
    for (let j = 0; j < w; j += 1)
      for (let i = 0; i < w; i += 1) {
        touched.add(z + i + j * ldz);
        expect(Math.abs(after[z + i + j * ldz]! - reference.get(i, j))).toBeLessThanOrEqual(tolerance);
        expect(after[z + i + j * ldz]).toBe(after[z + j + i * ldz]);
      }
    for (let k = 0; k < scratch; k += 1) touched.add(s + k);
    for (let k = 0; k < before.length; k += 1) if (!touched.has(k)) expect(Object.is(after[k], before[k])).toBe(true);
    kernel.raw.release!(base);
    arena.dispose();
  }
});
