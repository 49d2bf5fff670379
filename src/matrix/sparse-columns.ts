// A rectangular sparse matrix by columns, and the checks its arrays must pass.

import { IndexRangeError } from "../errors.js";
import { finiteNumbersOf, indicesOf, requireIndex, requireLength } from "../support/checks.js";

/** A rectangular matrix in compressed sparse columns, counting from 0: a Jacobian, say. Rows within a column in any order. */
export interface SparseColumns {
  rows: number;
  columns: number;
  /** Length columns + 1, from 0, never falling. */
  columnPointers: ArrayLike<number>;
  /** Length columnPointers[columns], each in [0, rows). */
  rowIndices: ArrayLike<number>;
  values: ArrayLike<number>;
}

/** Column pointers of `columns` columns with `entries` entries in all, checked, as a fresh array. */
export function pointersOf(pointers: ArrayLike<number>, columns: number, entries: number): Int32Array {
  requireLength("columnPointers", pointers.length, columns + 1);
  const result = indicesOf("columnPointers", pointers, 0, entries);
  if (result[0] !== 0) throw new IndexRangeError("columnPointers[0]", result[0], 0, 0);
  for (let j = 1; j <= columns; j += 1) {
    if (result[j]! < result[j - 1]!) throw new IndexRangeError(`columnPointers[${j}]`, result[j], result[j - 1]!, entries);
  }
  if (result[columns] !== entries) throw new IndexRangeError(`columnPointers[${columns}]`, result[columns], entries, entries);
  return result;
}

/** The column of each entry. */
export function columnsOfEntries(columnPointers: Int32Array): Int32Array {
  const last = columnPointers.length - 1;
  const columns = new Int32Array(columnPointers[last]!);
  for (let j = 0; j < last; j += 1) columns.fill(j, columnPointers[j], columnPointers[j + 1]);
  return columns;
}

/** The same matrix, checked, in fresh typed arrays. */
export function checkedColumns(input: SparseColumns): {
  rows: number;
  columns: number;
  columnPointers: Int32Array;
  rowIndices: Int32Array;
  values: Float64Array;
} {
  const { rows, columns } = input;
  requireIndex("rows", rows, 0, 0x7fffffff);
  requireIndex("columns", columns, 0, 0x7fffffff);
  const columnPointers = pointersOf(input.columnPointers, columns, input.rowIndices.length);
  requireLength("values", input.values.length, input.rowIndices.length);
  const rowIndices = indicesOf("rowIndices", input.rowIndices, 0, rows - 1);
  const values = finiteNumbersOf("values", input.values, (p) => ` (row ${rowIndices[p]})`);
  return { rows, columns, columnPointers, rowIndices, values };
}
