// The bench's recursion for the selected inverse, which our own is timed against, must be right to be a measure.

import { CholeskyDecomposition, type Matrix } from "ml-matrix";
import { expect, test } from "vitest";
import { information } from "../../bench/families/information.js";
import { type FamilyName, families } from "../../bench/families.js";
import { type FactorColumns, Recursion } from "../../bench/harness/recursion.js";
import { denseOf, inverseByCholesky } from "../support/dense.js";
import { EnvelopeCholesky } from "../support/envelope.js";

/** L of a dense matrix in natural order, on the pattern that elimination gives. */
function factorOf(matrix: Matrix): FactorColumns {
  const lower = new CholeskyDecomposition(matrix).lowerTriangularMatrix;
  const n = matrix.rows;
  const rows: Set<number>[] = Array.from({ length: n }, (_, j) => new Set([j]));
  for (let j = 0; j < n; j += 1) for (let i = j + 1; i < n; i += 1) if (matrix.get(i, j) !== 0) rows[j]!.add(i);
  for (let j = 0; j < n; j += 1) {
    const below = [...rows[j]!].filter((i) => i > j);
    const parent = Math.min(...below);
    for (const i of below) if (i > parent) rows[parent]!.add(i);
  }
  const columns = rows.map((set) => [...set].sort((a, b) => a - b));
  return {
    order: n,
    columnPointers: Int32Array.from([0, ...columns.map((_, j) => columns.slice(0, j + 1).reduce((sum, c) => sum + c.length, 0))]),
    rowIndices: Int32Array.from(columns.flat()),
    values: Float64Array.from(columns.flatMap((column, j) => column.map((i) => lower.get(i, j)))),
  };
}

test.each(Object.keys(families) as FamilyName[])("%s: every entry on the pattern of L, to the accuracy of a dense library", (name) => {
  const made = information(families[name].make(24));
  const matrix = denseOf(made);
  const columns = factorOf(matrix);
  const recursion = new Recursion(columns);
  recursion.run();
  const found = recursion.inverse();
  recursion.release();
  const reference = new EnvelopeCholesky(made);
  const truth = Array.from({ length: made.order }, (_, j) => reference.inverseColumn(j).hi);
  const dense = inverseByCholesky(matrix);
  let [worst, worstDense] = [0, 0];
  for (let j = 0; j < made.order; j += 1) {
    for (let p = columns.columnPointers[j]!; p < columns.columnPointers[j + 1]!; p += 1) {
      const i = columns.rowIndices[p]!;
      const scale = Math.sqrt(truth[i]![i]! * truth[j]![j]!);
      worst = Math.max(worst, Math.abs(found[p]! - truth[j]![i]!) / scale);
      worstDense = Math.max(worstDense, Math.abs(dense.get(i, j) - truth[j]![i]!) / scale);
    }
  }
  expect(worst).toBeLessThanOrEqual(10 * Math.max(worstDense, 2 ** -53));
});
