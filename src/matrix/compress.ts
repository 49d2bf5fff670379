// From entries in any order to compressed columns, rows ascending, duplicates added up.
// Two distributions by counting, by row and then by column, each stable: O(entries + rows + columns), and duplicates add in the order given.

/** Entries by columns: rows ascending within each, none twice. */
export interface Compressed {
  /** Int32Array[columns + 1]. */
  columnPointers: Int32Array;
  /** Int32Array[entries]. */
  rowIndices: Int32Array;
  /** Float64Array[entries]. */
  values: Float64Array;
}

/** The lower triangle of a symmetric matrix. */
export interface LowerColumns extends Compressed {
  order: number;
}

/** Where each of the `buckets` begins once `keys` are distributed over them; one more element than buckets, the last is the total. */
function startsOf(keys: Int32Array, buckets: number): Int32Array {
  const start = new Int32Array(buckets + 1);
  for (let p = 0; p < keys.length; p += 1) start[keys[p]! + 1]! += 1;
  for (let k = 0; k < buckets; k += 1) start[k + 1]! += start[k]!;
  return start;
}

/** Entries (rows[p], columns[p], values[p]), within rowCount × columnCount, as compressed columns. The input is not modified. */
export function compressEntries(
  rowCount: number,
  columnCount: number,
  rows: Int32Array,
  columns: Int32Array,
  values: Float64Array,
): Compressed {
  const count = values.length;
  const byRow = new Int32Array(count);
  const rowFill = startsOf(rows, rowCount);
  for (let p = 0; p < count; p += 1) {
    const row = rows[p]!;
    byRow[rowFill[row]!] = p;
    rowFill[row]! += 1;
  }
  const byColumn = new Int32Array(count);
  const columnFill = startsOf(columns, columnCount);
  const columnStart = columnFill.slice();
  for (let k = 0; k < count; k += 1) {
    const p = byRow[k]!;
    const column = columns[p]!;
    byColumn[columnFill[column]!] = p;
    columnFill[column]! += 1;
  }

  const columnPointers = new Int32Array(columnCount + 1);
  const rowIndices = new Int32Array(count);
  const merged = new Float64Array(count);
  let end = 0;
  for (let j = 0; j < columnCount; j += 1) {
    const first = end;
    for (let k = columnStart[j]!; k < columnStart[j + 1]!; k += 1) {
      const p = byColumn[k]!;
      const row = rows[p]!;
      if (end > first && rowIndices[end - 1] === row) merged[end - 1]! += values[p]!;
      else {
        rowIndices[end] = row;
        merged[end] = values[p]!;
        end += 1;
      }
    }
    columnPointers[j + 1] = end;
  }
  if (end === count) return { columnPointers, rowIndices, values: merged };
  return { columnPointers, rowIndices: rowIndices.slice(0, end), values: merged.slice(0, end) };
}
