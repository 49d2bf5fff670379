// sigmatide/decide: from covariances to verdicts.
export type { Distribution } from "./distributions.js";
export { chiSquare, fisherF, noncentralChiSquare, normal, popeTau, studentT } from "./distributions.js";
export { ArgumentError, CovarianceError, DegreesOfFreedomError, LevelError } from "./errors.js";
export { noncentrality } from "./noncentrality.js";
