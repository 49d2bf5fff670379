import type { Estimate } from "../../estimate/estimate.js";
import type { Adjustment } from "../../model/adjustment.js";
import type { Reading } from "../../model/reading.js";
import type { ReadingKind } from "../../model/reading-form.js";
import { choleskyOf, forwardSolve } from "../small-matrix.js";

/** A network that has been adjusted, and the estimate under it. */
export interface Network {
  readonly adjustment: Adjustment;
  readonly estimate: Estimate;
}

/** A reading as it was given to the adjustment: the very object. */
export type GivenReading = Reading<string | ReadingKind>;

/** R, row-major. */
export function noiseCovariance({ standardDeviations, covariance }: GivenReading): Float64Array {
  if (covariance) return covariance;
  const m = standardDeviations!.length;
  const matrix = new Float64Array(m * m);
  for (let k = 0; k < m; ++k) matrix[k * (m + 1)] = standardDeviations![k]! ** 2;
  return matrix;
}

/** A⁻¹ B for symmetric positive definite A, B with `columns` columns, row-major. @throws {CovarianceError} */
export function solveSymmetric(name: string, a: Float64Array, order: number, b: Float64Array, columns = 1): Float64Array {
  const factor = choleskyOf(name, a, order);
  const x = forwardSolve(factor, order, Float64Array.from(b), columns);
  for (let i = order - 1; i >= 0; --i)
    for (let c = 0; c < columns; ++c) {
      let sum = x[i * columns + c]!;
      for (let k = i + 1; k < order; ++k) sum -= factor[k * order + i]! * x[k * columns + c]!;
      x[i * columns + c] = sum / factor[i * order + i]!;
    }
  return x;
}

/** A B, A `rows` × `inner`, B `inner` × `columns`, row-major. */
export function product(a: Float64Array, b: Float64Array, rows: number, inner: number, columns: number): Float64Array {
  const out = new Float64Array(rows * columns);
  for (let i = 0; i < rows; ++i)
    for (let k = 0; k < inner; ++k) for (let j = 0; j < columns; ++j) out[i * columns + j]! += a[i * inner + k]! * b[k * columns + j]!;
  return out;
}
