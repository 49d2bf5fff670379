// The package's public surface.
export { default, type InitInput, type InitOptions, type InitOutput, initSync, type SyncInitInput } from "../bindings/loader.js";
export type { SliceOptions } from "../bindings/slices.js";
export * from "./errors.js";
export * from "./estimate/commit-errors.js";
export * from "./estimate/errors.js";
export {
  type CommitReport,
  Estimate,
  type EstimateOptions,
  type EstimateStatistics,
  type Health,
  type MeasurementId,
} from "./estimate/estimate.js";
export type { Evaluation } from "./estimate/evaluate.js";
export type { Linearization, MeasurementInput, StateId } from "./estimate/rows.js";
export {
  CholeskyFactor,
  type FactorStatistics,
  type InverseDiagonalOptions,
  type RowStatistics,
  type SelectedInverseOptions,
} from "./matrix/cholesky-factor.js";
export { factorize, factorizeAsync } from "./matrix/factorize.js";
export {
  type FactorizeRowsOptions,
  factorizeRows,
  factorizeRowsAsync,
  type LeastSquares,
  type LeastSquaresOptions,
  leastSquares,
} from "./matrix/factorize-rows.js";
export { type MatrixMarketColumns, readMatrixMarket } from "./matrix/matrix-market-reader.js";
export type { FactorizeOptions, OrderingName } from "./matrix/options.js";
export type { SparseColumns } from "./matrix/sparse-columns.js";
export { SymmetricMatrix } from "./matrix/symmetric-matrix.js";
export type { Triangle } from "./matrix/triangles.js";
export { type MemoryUsage, memoryUsage, setMemoryLimit } from "./support/memory.js";
