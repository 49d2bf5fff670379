// The references that other tests hold results against, themselves held against closed forms.
import fc from "fast-check";
import { Matrix } from "ml-matrix";
import { describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { information } from "../../bench/families/information.js";
import { denseOf, inverseByCholesky, isPositiveDefinite, logDeterminantByCholesky, lowerColumnsOf } from "../support/dense.js";
import { add, type DoubleDouble, divide, multiply, squareRoot, subtract, twoProduct, twoSum } from "../support/double-double.js";
import { EnvelopeCholesky } from "../support/envelope.js";
import { determinantExactly, inverseExactly, Rational, solveExactly } from "../support/rational.js";

const doubles = fc.double({ min: -1e100, max: 1e100, noNaN: true }).filter((v) => v === 0 || Math.abs(v) > 1e-100);
const exact = ([hi, lo]: DoubleDouble): Rational => Rational.fromNumber(hi).plus(Rational.fromNumber(lo));
/** |found − truth| ≤ bound · |scale|, in exact arithmetic. */
const within = (found: Rational, truth: Rational, scale: Rational, bound: number): boolean => {
  const error = found.minus(truth);
  return Math.abs(error.toNumber()) <= bound * Math.abs(scale.toNumber());
};
/** Entry (i, j) of the inverse of the Hilbert matrix 1 / (i + j + 1), by binomial coefficients (Choi 1983, Amer. Math. Monthly 90). */
const hilbertInverse = (n: number, i: number, j: number): bigint => {
  const choose = (a: number, b: number): bigint => {
    let c = 1n;
    for (let k = 1; k <= b; k += 1) c = (c * BigInt(a - b + k)) / BigInt(k);
    return c;
  };
  const sign = (i + j) % 2 === 0 ? 1n : -1n;
  return sign * BigInt(i + j + 1) * choose(n + i, n - j - 1) * choose(n + j, n - i - 1) * choose(i + j, i) ** 2n;
};
const hilbert = (n: number): Rational[][] =>
  Array.from({ length: n }, (_, i) => Array.from({ length: n }, (__, j) => Rational.of(1, i + j + 1)));

describe("double-double", () => {
  test("two-sum and two-product lose nothing", () => {
    fc.assert(
      fc.property(doubles, doubles, (a, b) => {
        expect(exact(twoSum(a, b)).equals(Rational.fromNumber(a).plus(Rational.fromNumber(b)))).toBe(true);
        expect(exact(twoProduct(a, b)).equals(Rational.fromNumber(a).times(Rational.fromNumber(b)))).toBe(true);
      }),
    );
  });

  // A pair carries at least 106 bits; each operation loses at most a few units of 2⁻¹⁰⁴ (Joldes, Muller, Popescu 2017: 3 to 15 · 2⁻¹⁰⁶).
  const bound = 16 * 2 ** -106;
  test("sums, products, quotients and roots of pairs are right to 31 digits", () => {
    const pairs = fc.tuple(doubles, fc.double({ min: -1, max: 1, noNaN: true })).map(([a, b]) => twoSum(a, (a * b) / 2 ** 54));
    fc.assert(
      fc.property(pairs, pairs, (a, b) => {
        const [x, y] = [exact(a), exact(b)];
        // Sums may cancel: their error is relative to the terms, not to the result.
        const terms = Rational.fromNumber(Math.abs(a[0]) + Math.abs(b[0]));
        expect(within(exact(add(a, b)), x.plus(y), terms, bound)).toBe(true);
        expect(within(exact(subtract(a, b)), x.minus(y), terms, bound)).toBe(true);
        expect(within(exact(multiply(a, b)), x.times(y), x.times(y), bound)).toBe(true);
        if (b[0] !== 0) expect(within(exact(divide(a, b)), x.over(y), x.over(y), bound)).toBe(true);
        if (a[0] < 0) return;
        const root = exact(squareRoot(a));
        expect(within(root.times(root), x, x, 2 * bound)).toBe(true);
      }),
    );
  });
});

describe("exact fractions", () => {
  test("the inverse of the Hilbert matrix of order 10 equals its closed form, and its determinant the product of factorials", () => {
    const n = 10;
    const inverse = inverseExactly(hilbert(n));
    for (let i = 0; i < n; i += 1)
      for (let j = 0; j < n; j += 1) expect(inverse[i]![j]!.equals(Rational.of(hilbertInverse(n, i, j)))).toBe(true);
    // det H = c(n)⁴ / c(2n), c(n) = Π_{k<n} k! (Hilbert 1894).
    const superfactorial = (m: number): bigint => {
      let [product, factorial] = [1n, 1n];
      for (let k = 1; k < m; k += 1) {
        factorial *= BigInt(k);
        product *= factorial;
      }
      return product;
    };
    expect(determinantExactly(hilbert(n)).equals(Rational.of(superfactorial(n) ** 4n, superfactorial(2 * n)))).toBe(true);
  });

  test("rows out of order, a sign and a singular matrix", () => {
    const [a, b] = [Rational.of(0), Rational.of(2)];
    expect(
      determinantExactly([
        [a, b],
        [b, a],
      ]).equals(Rational.of(-4)),
    ).toBe(true);
    expect(
      solveExactly(
        [
          [a, b],
          [b, a],
        ],
        [Rational.of(1), Rational.of(3)],
      ).map((v) => v.toNumber()),
    ).toEqual([1.5, 0.5]);
    expect(() =>
      inverseExactly([
        [b, b],
        [b, b],
      ]),
    ).toThrow("singular");
    expect(determinantExactly([]).toNumber()).toBe(1);
  });

  test("doubles and decimal texts come and go unchanged", () => {
    fc.assert(fc.property(fc.double({ noNaN: true, noDefaultInfinity: true }), (v) => Rational.fromNumber(v).toNumber() === v));
    expect(Rational.fromDecimal("-12.5e-3").equals(Rational.of(-1, 80))).toBe(true);
    expect(Rational.fromDecimal("3e2").equals(Rational.of(300))).toBe(true);
    expect(() => Rational.fromDecimal("1,5")).toThrow("not a decimal");
    expect(Rational.of(1, 3).toNumber()).toBe(1 / 3);
  });
});

describe("double-double Cholesky over the envelope", () => {
  test("the inverse of the Hilbert matrix of order 8, condition 1.5e10, is right to 19 digits where a double's Cholesky keeps 6", () => {
    const n = 8;
    // Row i times lcm(1 … 15) / 1 is an integer: the scaled matrix is exact in doubles, its inverse the closed form over the factor.
    const scale = 360360;
    const columns = lowerColumnsOf(new Matrix(hilbert(n).map((row) => row.map((v) => v.times(Rational.of(scale)).toNumber()))));
    const factor = new EnvelopeCholesky(columns);
    for (let j = 0; j < n; j += 1) {
      const column = factor.inverseColumn(j);
      for (let i = 0; i < n; i += 1) {
        const truth = Rational.of(hilbertInverse(n, i, j), scale);
        // n · condition · 2⁻¹⁰⁴ = 8 · 1.5e10 · 5e-32 = 6e-21.
        expect(within(exact(column.get(i)), truth, truth, 1e-19)).toBe(true);
      }
    }
  });

  test("tridiagonal [−1 2 −1]: diagonal i (n + 1 − i) / (n + 1), determinant n + 1 (Strang; Elliott 1953)", () => {
    const n = 500;
    const rowIndices: number[] = [];
    const values: number[] = [];
    const columnPointers = [0];
    for (let j = 0; j < n; j += 1) {
      rowIndices.push(j, ...(j + 1 < n ? [j + 1] : []));
      values.push(2, ...(j + 1 < n ? [-1] : []));
      columnPointers.push(values.length);
    }
    const factor = new EnvelopeCholesky({ order: n, columnPointers, rowIndices, values });
    const diagonal = factor.inverseDiagonal();
    // Rounded once to double, after errors below 1e-25.
    for (let i = 1; i <= n; i += 1) expect(diagonal[i - 1]).toBe((i * (n + 1 - i)) / (n + 1));
    // n logarithms below 0.7, each to an ulp.
    expect(Math.abs(factor.logDeterminant() - Math.log(n + 1))).toBeLessThan(n * 2 ** -52);
  });

  test("on a chain the recursion over the envelope equals whole columns, and both equal a dense library to its own accuracy", () => {
    const matrix = information(chain(60, { fixEvery: 7 }));
    const factor = new EnvelopeCholesky(matrix);
    const diagonal = factor.inverseDiagonal();
    const full = denseOf(matrix);
    const dense = inverseByCholesky(full);
    for (let j = 0; j < matrix.order; j += 1) {
      expect(diagonal[j]).toBe(factor.inverseColumn(j).hi[j]);
      // Condition about 1e7 here.
      expect(Math.abs(dense.get(j, j) / diagonal[j]! - 1)).toBeLessThan(1e-9);
    }
    expect(Math.abs(logDeterminantByCholesky(full) / factor.logDeterminant() - 1)).toBeLessThan(1e-12);
    const rhs = Array.from({ length: matrix.order }, (_, k) => Math.sin(k));
    const solution = factor.solve(rhs);
    for (let j = 0; j < matrix.order; j += 1) {
      let sum: DoubleDouble = [0, 0];
      for (let i = 0; i < matrix.order; i += 1) sum = add(sum, multiply([full.get(i, j), 0], solution.get(i)));
      expect(Math.abs(subtract(sum, [rhs[j]!, 0])[0])).toBeLessThan(1e-20);
    }
  });

  test("a matrix that is not positive definite is refused with the pivot, as the dense library refuses it", () => {
    const indefinite = new Matrix([
      [1, 2],
      [2, 1],
    ]);
    expect(() => new EnvelopeCholesky(lowerColumnsOf(indefinite))).toThrow("pivot -3 of unknown 1");
    expect(isPositiveDefinite(indefinite)).toBe(false);
  });
});
