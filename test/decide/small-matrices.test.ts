import { CholeskyDecomposition, EigenvalueDecomposition, Matrix } from "ml-matrix";
import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { CovarianceError } from "../../src/decide/errors.js";
import { choleskyOf, forwardSolve, rowMajor, symmetricMatrix, whitened } from "../../src/decide/small-matrix.js";
import { symmetricEigen } from "../../src/decide/symmetric-eigen.js";
import { covarianceOf, randomFactor } from "./monte-carlo.js";

const { normal, below } = random(20);
const cases = Array.from({ length: 200 }, () => covarianceOf(randomFactor(1 + below(6), normal)));

describe("eigenvalues and eigenvectors", () => {
  test("reproduce the matrix and agree with a general library", () => {
    for (const matrix of cases) {
      const n = matrix.length;
      const { values, vectors } = symmetricEigen(Float64Array.from(matrix.flat()), n);
      // backward stable: a few rotations an entry, each within ε of the norm
      const bound = 40 * n * Number.EPSILON * values[0]!;
      const library = [...new EigenvalueDecomposition(new Matrix(matrix)).realEigenvalues].sort((a, b) => b - a);
      for (let k = 0; k < n; ++k) expect(Math.abs(values[k]! - library[k]!)).toBeLessThanOrEqual(bound);
      for (let i = 0; i < n; ++i)
        for (let j = 0; j < n; ++j) {
          const entry = vectors.reduce((sum, v, k) => sum + values[k]! * v[i]! * v[j]!, 0);
          expect(Math.abs(entry - matrix[i]![j]!)).toBeLessThanOrEqual(bound);
          const product = vectors[i]!.reduce((sum, v, k) => sum + v * vectors[j]![k]!, 0);
          expect(Math.abs(product - (i === j ? 1 : 0))).toBeLessThanOrEqual(40 * n * Number.EPSILON);
        }
    }
  });

  test("two by two is the closed form (a + d) / 2 ± √(((a − d) / 2)² + b²)", () => {
    for (const [a, b, d] of [
      [5, 2, 1],
      [1, 0, 3],
      [2, 1, 2],
      [1e-6, 3e-7, 4e-6],
    ] as const) {
      const root = Math.hypot((a - d) / 2, b);
      const { values } = symmetricEigen(Float64Array.of(a, b, b, d), 2);
      expect(values[0]).toBeCloseTo((a + d) / 2 + root, 14);
      expect(values[1]).toBeCloseTo((a + d) / 2 - root, 14);
    }
  });

  test("a zero matrix and a matrix of rank one", () => {
    expect([...symmetricEigen(new Float64Array(9), 3).values]).toEqual([0, 0, 0]);
    const { values } = symmetricEigen(Float64Array.of(1, 2, 3, 2, 4, 6, 3, 6, 9), 3);
    expect(values[0]).toBeCloseTo(14, 13);
    expect(Math.abs(values[1]!) + Math.abs(values[2]!)).toBeLessThanOrEqual(1e-14);
  });
});

test("Cholesky factor and whitening agree with a general library", () => {
  for (const matrix of cases) {
    const n = matrix.length;
    const factor = choleskyOf("covariance", symmetricMatrix("covariance", matrix, n), n);
    const library = new CholeskyDecomposition(new Matrix(matrix)).lowerTriangularMatrix.to1DArray();
    for (const [k, entry] of library.entries())
      expect(Math.abs(factor[k]! - entry)).toBeLessThanOrEqual(1e-13 * Math.max(...library.map(Math.abs)));
    const unit = whitened(factor, n, Float64Array.from(matrix.flat()));
    // the condition of a random factor here stays below 1e6, and whitening loses no more than that of 16 digits
    for (let i = 0; i < n; ++i)
      for (let j = 0; j < n; ++j) expect(Math.abs(unit[i * n + j]! - (i === j ? 1 : 0))).toBeLessThanOrEqual(1e-9);
  }
  expect([...forwardSolve(Float64Array.of(2, 0, 1, 4), 2, Float64Array.of(6, 11))]).toEqual([3, 2]);
});

describe("what is no covariance is refused, with the place", () => {
  test.each([
    ["another number of entries", [1, 2, 3], "has 3 entries: give 2 × 2"],
    ["a short row", [[1, 0], [0]], "1 entries in row 1"],
    ["not a number", [1, Number.NaN, 0, 1], "has NaN at (0, 1)"],
    [
      "not symmetric",
      [
        [1, 0.5],
        [0.4, 1],
      ],
      "is not symmetric: 0.4 at (1, 0) but 0.5 at (0, 1)",
    ],
    ["correlation 1", [1, 1, 1, 1], "component 1 has no variance of its own"],
    ["negative variance", [-1, 0, 0, 1], "component 0"],
  ])("%s", (_, matrix, message) => {
    const build = () => choleskyOf("covariance", symmetricMatrix("covariance", matrix as number[], 2), 2);
    expect(build).toThrow(CovarianceError);
    expect(build).toThrow(message);
  });
  test("nested rows and flat numbers are the same, and the input stays as it was", () => {
    const nested = [
      [1, 2, 3],
      [4, 5, 6],
    ];
    const flat = rowMajor("matrix", nested, 2, 3);
    expect([...flat]).toEqual([...rowMajor("matrix", nested.flat(), 2, 3)]);
    flat[0] = 9;
    expect(nested[0]![0]).toBe(1);
  });
});
