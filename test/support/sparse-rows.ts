// Rows of a Jacobian as tests write them, in compressed columns.
import type { SparseColumns } from "../../src/index.js";

/** Zeros are left out, unless `whole`. */
export function jacobianOf(rows: readonly (readonly number[])[], whole = false): SparseColumns {
  const columns = rows[0]?.length ?? 0;
  const columnPointers = [0];
  const rowIndices: number[] = [];
  const values: number[] = [];
  for (let j = 0; j < columns; j += 1) {
    for (const [r, row] of rows.entries()) {
      if (row[j] === 0 && !whole) continue;
      rowIndices.push(r);
      values.push(row[j]!);
    }
    columnPointers.push(values.length);
  }
  return { rows: rows.length, columns, columnPointers, rowIndices, values };
}
