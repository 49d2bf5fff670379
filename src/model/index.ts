export type { EstimateLike, LinearMeasurement } from "./adjustment/estimate-like.js";
export {
  Adjustment,
  type AdjustmentOptions,
  type AdjustmentReport,
  type Iteration,
  type ReadingKey,
  type StateFacts,
} from "./adjustment.js";
export { type JacobianWarning, type OwnFunction, ownFunction } from "./own-function.js";
export type { Quantity } from "./quantities.js";
export type { Reading, StateDeclaration } from "./reading.js";
export type { ReadingForm, ReadingKind, Setup } from "./reading-form.js";
export { findForm, type ReadingKindName, readingKinds } from "./reading-kinds.js";
export { cauchy, huber, type RobustWeight, tukey } from "./robust.js";
export type { Known } from "./starting/known.js";
export { type MissingStart, startingValue, startingValues } from "./starting/starting-values.js";
export { type StateAt, type StateKind, type StateKindName, stateKinds } from "./states.js";
