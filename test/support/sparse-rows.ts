// Rows of a Jacobian as tests write them, in compressed columns.
import type { Rows } from "../../bench/families/rows.js";
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

/** Rows of a measurement stream, by columns. */
export function byColumns({ rows, columns, rowPointers, columnIndices, values }: Rows): SparseColumns {
  const columnPointers = new Int32Array(columns + 1);
  for (const j of columnIndices) columnPointers[j + 1]! += 1;
  for (let j = 0; j < columns; j += 1) columnPointers[j + 1]! += columnPointers[j]!;
  const next = columnPointers.slice();
  const rowIndices = new Int32Array(values.length);
  const byColumn = new Float64Array(values.length);
  for (let r = 0; r < rows; r += 1) {
    for (let p = rowPointers[r]!; p < rowPointers[r + 1]!; p += 1) {
      const at = next[columnIndices[p]!]!;
      next[columnIndices[p]!] = at + 1;
      rowIndices[at] = r;
      byColumn[at] = values[p]!;
    }
  }
  return { rows, columns, columnPointers, rowIndices, values: byColumn };
}
