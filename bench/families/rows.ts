// The measurement rows of a stream, each divided by its standard deviation, one row after another.
import type { SparseColumns } from "../../src/index.js";
import type { Stream } from "./stream.js";

export interface Rows {
  readonly rows: number;
  readonly columns: number;
  /** Length rows + 1. */
  readonly rowPointers: Int32Array;
  readonly columnIndices: Int32Array;
  readonly values: Float64Array;
  /** Residuals, divided like the rows. */
  readonly residual: Float64Array;
}

export function whitenedRows(stream: Stream): Rows {
  const start = new Int32Array(stream.states + 1);
  for (let s = 0; s < stream.states; s += 1) start[s + 1] = start[s]! + stream.dimension(s);
  const rowPointers = [0];
  const columnIndices: number[] = [];
  const values: number[] = [];
  const residuals: number[] = [];
  for (let k = 0; k < stream.measurements; k += 1) {
    const { states, jacobians, residual, standardDeviations } = stream.measurement(k);
    for (let r = 0; r < residual.length; r += 1) {
      for (const [u, state] of states.entries()) {
        const dimension = stream.dimension(state);
        for (let i = 0; i < dimension; i += 1) {
          const value = jacobians[u]![r * dimension + i]!;
          if (value === 0) continue;
          columnIndices.push(start[state]! + i);
          values.push(value / standardDeviations[r]!);
        }
      }
      rowPointers.push(values.length);
      residuals.push(residual[r]! / standardDeviations[r]!);
    }
  }
  return {
    rows: residuals.length,
    columns: start[stream.states]!,
    rowPointers: Int32Array.from(rowPointers),
    columnIndices: Int32Array.from(columnIndices),
    values: Float64Array.from(values),
    residual: Float64Array.from(residuals),
  };
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
