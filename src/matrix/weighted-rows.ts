// A Jacobian by columns turned into rows, each multiplied by the root of its weight; rows of weight zero fall out.
import { EmptyColumnError, EmptyRowError, TooFewRowsError } from "../errors.js";
import { finiteNumbersOf } from "../support/checks.js";
import { weightsOf } from "./normal-equations.js";
import { checkedColumns, type SparseColumns } from "./sparse-columns.js";

export interface WeightedRows {
  /** The Jacobian, checked, without the rows that fell out (their numbers stay free). */
  readonly jacobian: SparseColumns & { columnPointers: Int32Array; rowIndices: Int32Array; values: Float64Array };
  /** One for each row of the Jacobian. */
  readonly weights: Float64Array;
  /** The Jacobian's number of each row that counts, ascending; and of those that fell out. */
  readonly kept: Int32Array;
  readonly ignored: readonly number[];
  /** The rows that count, √weight × row: Int32Array[kept + 1], Int32Array[entries], Float64Array[entries]. */
  readonly rowPointers: Int32Array;
  readonly columnIndices: Int32Array;
  readonly values: Float64Array;
}

/** @throws {LengthError | IndexRangeError | NotFiniteError | NegativeWeightError | EmptyRowError | EmptyColumnError | TooFewRowsError}
 *  Cost: O(entries + rows + columns). */
export function weightedRows(given: SparseColumns, givenWeights: ArrayLike<number> | undefined): WeightedRows {
  const checked = checkedColumns(given);
  const { rows, columns } = checked;
  const weights = givenWeights ? weightsOf(givenWeights, rows) : new Float64Array(rows).fill(1);
  const jacobian = weights.includes(0) ? withoutIgnored(checked, weights) : checked;
  const { columnPointers, rowIndices } = jacobian;
  const ignored: number[] = [];
  const place = new Int32Array(rows).fill(-1);
  const kept = new Int32Array(rows);
  let count = 0;
  for (let r = 0; r < rows; r += 1) {
    if (weights[r] === 0) {
      ignored.push(r);
      continue;
    }
    kept[count] = r;
    place[r] = count;
    count += 1;
  }
  const rowPointers = new Int32Array(count + 1);
  for (const r of rowIndices) rowPointers[place[r]! + 1]! += 1;
  for (let r = 0; r < count; r += 1) {
    if (rowPointers[r + 1] === 0) throw new EmptyRowError(kept[r]!);
    rowPointers[r + 1]! += rowPointers[r]!;
  }
  for (let j = 0; j < columns; j += 1) if (columnPointers[j] === columnPointers[j + 1]) throw new EmptyColumnError(j);
  if (count < columns) throw new TooFewRowsError(count, columns);
  const next = rowPointers.slice(0, count);
  const columnIndices = new Int32Array(rowIndices.length);
  const values = new Float64Array(rowIndices.length);
  for (let j = 0; j < columns; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const r = rowIndices[p]!;
      const at = next[place[r]!]!;
      next[place[r]!] = at + 1;
      columnIndices[at] = j;
      values[at] = jacobian.values[p]! * Math.sqrt(weights[r]!);
    }
  }
  finiteNumbersOf("√weight × value", values, () => " (too large for f64)");
  return { jacobian, weights, kept: kept.slice(0, count), ignored, rowPointers, columnIndices, values };
}

function withoutIgnored(from: WeightedRows["jacobian"], weights: Float64Array): WeightedRows["jacobian"] {
  const { rows, columns } = from;
  const stays = (p: number): boolean => weights[from.rowIndices[p]!] !== 0;
  const columnPointers = new Int32Array(columns + 1);
  let entries = 0;
  for (let j = 0; j < columns; j += 1) {
    for (let p = from.columnPointers[j]!; p < from.columnPointers[j + 1]!; p += 1) if (stays(p)) entries += 1;
    columnPointers[j + 1] = entries;
  }
  return {
    rows,
    columns,
    columnPointers,
    rowIndices: from.rowIndices.filter((_, p) => stays(p)),
    values: from.values.filter((_, p) => stays(p)),
  };
}
