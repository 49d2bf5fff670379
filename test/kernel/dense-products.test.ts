import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { Arena, gamma, preciseSum } from "../support/dense-arena.js";
import * as twins from "../support/dense-twins.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const odd = (rows: number) => rows + 1 - (rows & 1);
const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);
const sizes = [...upTo(10), 13];
/** Each |got − exact| ≤ γ_{k+1}·(|C| + |A||B|): Higham, section 3.1 and 3.5, valid for any order, fused or not. */
function within(got: number, exact: { sum: number; magnitude: number }, terms: number): void {
  expect(Math.abs(got - exact.sum)).toBeLessThanOrEqual(gamma(terms + 1) * exact.magnitude);
}

test("multiply equals its scalar twin and stays in the bound of a product, every edge shape, both layouts of B", () => {
  const uniform = random(11).uniform;
  for (const m of sizes)
    for (const n of sizes)
      for (const k of [0, 1, 2, 3, 6, 9]) {
        const arena = new Arena(kernel, 1200, uniform);
        const [lda, ldb, ldc] = [odd(m), odd(Math.max(n, k)) + 2, odd(m) + 2];
        const [a, b, c] = [arena.matrix(m, k, lda), arena.matrix(Math.max(n, k), Math.max(n, k), ldb), arena.matrix(m, n, ldc)];
        for (const mode of twins.modes)
          for (const [bRow, bCol] of [
            [1, ldb],
            [ldb, 1],
          ] as const) {
            const result = arena.agree(
              (raw, at) => raw.multiply!(m, n, k, at(a), lda, at(b), bRow, bCol, at(c), ldc, mode),
              (v) => twins.multiply(v, m, n, k, a, lda, b, bRow, bCol, c, ldc, mode) as undefined,
            );
            if ((m + n) % 5 !== 0) continue; // the bound on a part of the shapes
            for (let i = 0; i < m; i += 1)
              for (let j = 0; j < n; j += 1) {
                const sign = mode >= 2 ? -1 : 1;
                const terms = upTo(k).map((p) => [sign * arena.values[a + i + p * lda]!, arena.values[b + p * bRow + j * bCol]!] as const);
                const start = mode & 1 ? arena.values[c + i + j * ldc]! : 0;
                within(result.at(c + i + j * ldc), preciseSum(start, terms), k);
              }
          }
        arena.dispose();
      }
});

test("multiply reads nothing of C in the modes that assign", () => {
  const arena = new Arena(kernel, 400, random(12).uniform);
  const [a, b, c] = [arena.matrix(7, 5, 9), arena.matrix(5, 6, 7), arena.empty(7, 6, 9)];
  for (const mode of [0, 2] as const)
    arena.agree(
      (raw, at) => raw.multiply!(7, 6, 5, at(a), 9, at(b), 1, 7, at(c), 9, mode),
      (v) => twins.multiply(v, 7, 6, 5, a, 9, b, 1, 7, c, 9, mode) as undefined,
    );
  arena.dispose();
});

test("large products, past every block size, equal the twins", () => {
  const uniform = random(13).uniform;
  for (const [m, n, k] of [
    [131, 103, 301],
    [3, 210, 530],
    [301, 5, 270],
  ] as const) {
    const arena = new Arena(kernel, 2 * (m + 1) * (k + 1) + 2 * (k + 1) * (n + 1) + (m + 1) * (n + 1) + 200, uniform);
    const [lda, ldb, ldc] = [m + 1, k + 1, m];
    const [a, b, c] = [arena.matrix(m, k, lda), arena.matrix(k, n, ldb), arena.matrix(m, n, ldc)];
    arena.agree(
      (raw, at) => raw.multiply!(m, n, k, at(a), lda, at(b), 1, ldb, at(c), ldc, 3),
      (v) => twins.multiply(v, m, n, k, a, lda, b, 1, ldb, c, ldc, 3) as undefined,
    );
    const [at, bt] = [arena.matrix(k, m, k + 1), arena.matrix(n, k, n + 1)];
    arena.agree(
      (raw, at_) => raw.multiplyTransposed!(m, n, k, at_(at), k + 1, at_(b), ldb, at_(c), ldc, 0),
      (v) => twins.multiplyTransposed(v, m, n, k, at, k + 1, b, ldb, c, ldc, 0) as undefined,
    );
    arena.agree(
      (raw, at_) => raw.multiply!(m, n, k, at_(a), lda, at_(bt), n + 1, 1, at_(c), ldc, 2),
      (v) => twins.multiply(v, m, n, k, a, lda, bt, n + 1, 1, c, ldc, 2) as undefined,
    );
    arena.dispose();
  }
});

test("rankUpdateLower equals its twin and leaves what lies above the diagonal alone", () => {
  const uniform = random(14).uniform;
  for (const [n, k] of [...sizes.flatMap((n) => [0, 1, 2, 3, 6].map((k) => [n, k] as const)), [211, 37], [99, 290]] as const) {
    const arena = new Arena(kernel, (n + 3) * (k + n + 4) + 20, uniform);
    const [lda, ldc] = [odd(n), odd(n) + 2];
    const [a, c] = [arena.matrix(n, k, lda), arena.trapezoid(n, n, ldc)];
    for (const mode of twins.modes)
      arena.agree(
        (raw, at) => raw.rankUpdateLower!(n, k, at(a), lda, at(c), ldc, mode),
        (v) => twins.rankUpdateLower(v, n, k, a, lda, c, ldc, mode) as undefined,
      );
    arena.dispose();
  }
});

test("multiplyTransposed and its lower triangle equal their twins, every edge shape", () => {
  const uniform = random(15).uniform;
  for (const m of sizes)
    for (const n of sizes)
      for (const k of [0, 1, 2, 3, 6, 9]) {
        const arena = new Arena(kernel, 1200, uniform);
        const [lda, ldb, ldc] = [odd(k), odd(k) + 2, odd(m) + 2];
        const [a, b, c] = [arena.matrix(k, m, lda), arena.matrix(k, n, ldb), arena.matrix(m, n, ldc)];
        const mode = ((m + n + k) % 4) as twins.Mode;
        arena.agree(
          (raw, at) => raw.multiplyTransposed!(m, n, k, at(a), lda, at(b), ldb, at(c), ldc, mode),
          (v) => twins.multiplyTransposed(v, m, n, k, a, lda, b, ldb, c, ldc, mode) as undefined,
        );
        if (m === n) {
          const t = arena.trapezoid(m, m, ldc);
          for (const each of twins.modes)
            arena.agree(
              (raw, at) => raw.multiplyTransposedLower!(m, k, at(a), lda, at(b), ldb, at(t), ldc, each),
              (v) => twins.multiplyTransposedLower(v, m, k, a, lda, b, ldb, t, ldc, each) as undefined,
            );
        }
        arena.dispose();
      }
});

test("dot, axpy and the products with a vector equal their twins", () => {
  const uniform = random(16).uniform;
  for (const m of [...sizes, 37])
    for (const w of sizes) {
      const arena = new Arena(kernel, 800, uniform);
      const lda = odd(m);
      const [a, x, y] = [arena.matrix(m, w, lda), arena.matrix(w, 1, w), arena.matrix(m, 1, m)];
      arena.agree(
        (raw, at) => raw.subtractProduct!(m, w, at(a), lda, at(x), at(y)),
        (v) => twins.subtractProduct(v, m, w, a, lda, x, y) as undefined,
      );
      arena.agree(
        (raw, at) => raw.subtractTransposedProduct!(m, w, at(a), lda, at(y), at(x)),
        (v) => twins.subtractTransposedProduct(v, m, w, a, lda, y, x) as undefined,
      );
      if (w > 0) {
        arena.agree(
          (raw, at) => raw.axpy!(m, 0.3, at(a), at(y)),
          (v) => twins.axpy(v, m, 0.3, a, y) as undefined,
        );
        arena.agree(
          (raw, at) => raw.dot!(m, at(a), at(y)),
          (v) => twins.dot(v, m, a, y),
        );
      }
      arena.dispose();
    }
});

test("mirror and transposeInto move entries and nothing else", () => {
  const uniform = random(17).uniform;
  for (const m of [...sizes, 38]) {
    const arena = new Arena(kernel, 15000, uniform);
    const c = arena.trapezoid(m, m, odd(m));
    arena.agree(
      (raw, at) => raw.mirror!(m, at(c), odd(m)),
      (v) => twins.mirror(v, m, c, odd(m)) as undefined,
    );
    for (const n of sizes) {
      const [a, b] = [arena.matrix(m, n, odd(m)), arena.empty(n, m, odd(n))];
      arena.agree(
        (raw, at) => raw.transposeInto!(m, n, at(a), odd(m), at(b), odd(n)),
        (v) => twins.transposeInto(v, m, n, a, odd(m), b, odd(n)) as undefined,
      );
    }
    arena.dispose();
  }
});
