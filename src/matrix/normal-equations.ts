// JᵀWJ column by column: column j is Σ over the rows r of J's column j of w_r J[r, j] × row r. A dense accumulator with marks collects each
// column, rows advance as j does, so only the lower triangle is formed.
// Source: Gustavson, "Two fast algorithms for sparse matrices: multiplication and permuted transposition", ACM TOMS 4 (1978).
import { NegativeWeightError } from "../errors.js";
import { finiteNumbersOf, requireLength } from "../support/checks.js";
import type { LowerColumns } from "./compress.js";
import { checkedColumns, type SparseColumns } from "./sparse-columns.js";

export function normalEquations(jacobian: SparseColumns, givenWeights?: ArrayLike<number>): LowerColumns {
  const { rows, columns: order, columnPointers, rowIndices, values } = checkedColumns(jacobian);
  const weights = givenWeights && weightsOf(givenWeights, rows);

  // J by rows; a row's columns come out ascending.
  const rowEnd = new Int32Array(rows + 1);
  for (const row of rowIndices) rowEnd[row + 1]! += 1;
  for (let r = 0; r < rows; r += 1) rowEnd[r + 1]! += rowEnd[r]!;
  const rowNext = rowEnd.slice(0, rows);
  const columnOf = new Int32Array(values.length);
  const rowValue = new Float64Array(values.length);
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const at = rowNext[rowIndices[p]!]!;
      columnOf[at] = j;
      rowValue[at] = values[p]!;
      rowNext[rowIndices[p]!] = at + 1;
    }
  }
  // From here on: the first entry of the row whose column is not yet done.
  rowNext.set(rowEnd.subarray(0, rows));

  const result: LowerColumns = {
    order,
    columnPointers: new Int32Array(order + 1),
    rowIndices: new Int32Array(Math.max(16, 2 * values.length)),
    values: new Float64Array(Math.max(16, 2 * values.length)),
  };
  const sums = new Float64Array(order);
  const markedFor = new Int32Array(order).fill(-1);
  let found = new Int32Array(64);
  let end = 0;
  for (let j = 0; j < order; j += 1) {
    let count = 0;
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const r = rowIndices[p]!;
      const factor = values[p]! * (weights ? weights[r]! : 1);
      let q = rowNext[r]!;
      while (columnOf[q]! < j) q += 1;
      rowNext[r] = q;
      for (const last = rowEnd[r + 1]!; q < last; q += 1) {
        const i = columnOf[q]!;
        if (markedFor[i] !== j) {
          markedFor[i] = j;
          sums[i] = 0;
          if (count === found.length) found = enlarged(found, new Int32Array(2 * count));
          found[count] = i;
          count += 1;
        }
        sums[i]! += factor * rowValue[q]!;
      }
    }
    if (end + count > result.rowIndices.length) {
      const room = 2 * (end + count);
      result.rowIndices = enlarged(result.rowIndices, new Int32Array(room));
      result.values = enlarged(result.values, new Float64Array(room));
    }
    found.subarray(0, count).sort();
    for (let k = 0; k < count; k += 1, end += 1) {
      result.rowIndices[end] = found[k]!;
      result.values[end] = sums[found[k]!]!;
    }
    result.columnPointers[j + 1] = end;
  }
  result.rowIndices = result.rowIndices.slice(0, end);
  result.values = result.values.slice(0, end);
  return result;
}

/** Weights of rows, checked, as a fresh array. */
export function weightsOf(given: ArrayLike<number>, rows: number): Float64Array {
  requireLength("weights", given.length, rows);
  const weights = finiteNumbersOf("weights", given);
  const negative = weights.findIndex((weight) => weight < 0);
  if (negative >= 0) throw new NegativeWeightError(negative, weights[negative]!);
  return weights;
}

function enlarged<T extends Int32Array | Float64Array>(from: T, into: T): T {
  into.set(from);
  return into;
}
