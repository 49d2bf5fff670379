// Small matrices as a caller writes them: a row-major Float64Array, or an array of rows.
import { MeasurementNotFiniteError, MeasurementShapeError } from "./errors.js";

/** Row-major, or an array of rows. */
export type Matrix = Float64Array | readonly ArrayLike<number>[];

/** Adds `matrix`, rows × columns, to `target`, column-major; for a symmetric matrix that is row-major too.
 *  @param part what it is, as a caller would write it. */
export function matrixInto(
  target: Float64Array,
  part: string,
  matrix: Matrix,
  rows: number,
  columns: number,
  measurement: string | undefined,
): void {
  if (matrix instanceof Float64Array) {
    if (matrix.length !== rows * columns)
      throw new MeasurementShapeError(
        part,
        `a Float64Array of length ${matrix.length}`,
        `${rows} × ${columns}, ${rows * columns} numbers by rows`,
        measurement,
      );
    for (let i = 0, k = 0; i < rows; i += 1) {
      for (let j = 0; j < columns; j += 1, k += 1) {
        const value = matrix[k]!;
        if (!Number.isFinite(value)) throw new MeasurementNotFiniteError(`${part}, row ${i}, column ${j},`, value, measurement);
        target[j * rows + i]! += value;
      }
    }
    return;
  }
  if (!Array.isArray(matrix))
    throw new MeasurementShapeError(
      part,
      String(matrix),
      `${rows} × ${columns}: a row-major Float64Array or an array of rows`,
      measurement,
    );
  if (matrix.length !== rows) throw new MeasurementShapeError(part, `${matrix.length} rows`, `${rows} × ${columns}`, measurement);
  for (let i = 0; i < rows; i += 1) {
    const row = matrix[i]! as ArrayLike<number>;
    if (row?.length !== columns)
      throw new MeasurementShapeError(
        `${part}, row ${i},`,
        row?.length === undefined ? `not a list but ${String(row)}` : `of length ${row.length}`,
        `a list of ${columns} numbers`,
        measurement,
      );
    for (let j = 0; j < columns; j += 1) {
      const value = row[j]!;
      if (!Number.isFinite(value)) throw new MeasurementNotFiniteError(`${part}, row ${i}, column ${j},`, value, measurement);
      target[j * rows + i]! += value;
    }
  }
}
