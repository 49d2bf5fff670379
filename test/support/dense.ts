// Dense algebra of a general library (ml-matrix) on our sparse inputs.
import { CholeskyDecomposition, Matrix } from "ml-matrix";
import type { LowerColumns } from "./envelope.js";

/** The full matrix; duplicates add up. */
export function denseOf({ order, columnPointers, rowIndices, values }: LowerColumns): Matrix {
  const full = Matrix.zeros(order, order);
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const i = rowIndices[p]!;
      full.set(i, j, full.get(i, j) + values[p]!);
      if (i !== j) full.set(j, i, full.get(i, j));
    }
  }
  return full;
}

export const isPositiveDefinite = (matrix: Matrix): boolean => new CholeskyDecomposition(matrix).isPositiveDefinite();

/** By the library's Cholesky decomposition and n right-hand sides. */
export const inverseByCholesky = (matrix: Matrix): Matrix => new CholeskyDecomposition(matrix).solve(Matrix.eye(matrix.rows));

export const logDeterminantByCholesky = (matrix: Matrix): number =>
  new CholeskyDecomposition(matrix).lowerTriangularMatrix.diagonal().reduce((sum, v) => sum + 2 * Math.log(v), 0);

/** The lower triangle of a dense symmetric matrix by columns, zeros left out. */
export function lowerColumnsOf(matrix: Matrix): LowerColumns {
  const columnPointers = [0];
  const rowIndices: number[] = [];
  const values: number[] = [];
  for (let j = 0; j < matrix.columns; j += 1) {
    for (let i = j; i < matrix.rows; i += 1) {
      if (matrix.get(i, j) === 0) continue;
      rowIndices.push(i);
      values.push(matrix.get(i, j));
    }
    columnPointers.push(values.length);
  }
  return { order: matrix.rows, columnPointers, rowIndices, values };
}
