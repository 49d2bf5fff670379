// sigmatide/decide: from covariances to verdicts. Each file states its formula and source.
export { type Assessment, type AssessmentOptions, assess } from "./assess/assessment.js";
export { type Movement, movements } from "./assess/movements.js";
export type { GivenReading, Network } from "./assess/network.js";
export {
  type Limits,
  type RelativePrecision,
  relativePrecision,
  type SemiAxis,
  type StatePrecision,
  statePrecisions,
} from "./assess/precision.js";
export { type Control, putBack, type Screening, type ScreeningOptions, type Suspect, screenReadings } from "./assess/screening.js";
export { type Weakness, weaknesses } from "./assess/weakness.js";
export { bestAssignment } from "./associate/best-assignment.js";
export type { Association, Pairing } from "./associate/candidates.js";
export { type InnovationCovariance, jointCompatibility } from "./associate/joint-compatibility.js";
export { type ConsistencyVerdict, normalizedSquaresTest, type WhitenessVerdict, whitenessTest } from "./consistency.js";
export type { Distribution } from "./distributions.js";
export { chiSquare, fisherF, noncentralChiSquare, normal, popeTau, studentT } from "./distributions.js";
export { confidenceScale, type EllipsoidAxis, type ErrorEllipse, errorEllipse, errorEllipsoid } from "./ellipse.js";
export { ArgumentError, CovarianceError, DegreesOfFreedomError, LevelError } from "./errors.js";
export { perTestLevel } from "./family-level.js";
export { type Candidates, gate, gateAll } from "./gate.js";
export { type GainOracle, type GreedyChoice, type GreedyOptions, type GreedyStep, selectGreedily } from "./greedy.js";
export { displacementTest, type MovementVerdict } from "./movement.js";
export { noncentrality } from "./noncentrality.js";
export { biasEffect, type Reliability, reliability } from "./reliability.js";
export { type AdjustedReading, type EstimatedFactor, type ResidualVerdict, residualTest } from "./residual-test.js";
export type { Matrix } from "./small-matrix.js";
export { type SuspectPair, suspectCorrelation } from "./suspects.js";
export { differenceCovariance, type ToleranceVerdict, toleranceVerdict } from "./tolerance.js";
export { type VarianceFactorVerdict, varianceFactorTest } from "./variance-factor.js";
export type { Verdict } from "./verdict.js";
