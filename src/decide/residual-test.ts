// Is this reading a blunder? Its residual against the residual's own covariance.
// Sources: W. Baarda (1968) (data snooping, w); A. J. Pope (1976) (τ, variance factor estimated); P. J. G. Teunissen, "Testing Theory"
// (2000), ch. 4 (a reading of several components as one vector).
import { chiSquare, type Distribution, fisherF, normal, popeTau } from "./distributions.js";
import { DegreesOfFreedomError } from "./errors.js";
import { requireDegreesOfFreedom, requireLevel, requirePositive } from "./require.js";
import { residualSpace, standardizedResidual } from "./residual-space.js";
import { type Matrix, sumOfSquares } from "./small-matrix.js";
import { inWords, percent, upperTest, type Verdict } from "./verdict.js";

/** σ̂₀² from the same adjustment, with its degrees of freedom. */
export interface EstimatedFactor {
  readonly value: number;
  readonly redundancy: number;
}

export type ResidualVerdict = Verdict<"fine" | "suspect" | "untestable">;

/** One reading after the adjustment; readings are independent of one another, components of one reading need not be. */
export interface AdjustedReading {
  /** v, length m: measured minus adjusted. */
  readonly residual: ArrayLike<number>;
  /** R, m × m: the noise the reading was given. */
  readonly noiseCovariance: Matrix;
  /** Qᵥ = R − J Σ Jᵀ, m × m. */
  readonly residualCovariance: Matrix;
}

/**
 * One component: w = v / σᵥ against the normal distribution, or Pope's τ = w / σ̂₀ when the variance factor is estimated.
 * Several: T = vᵀ Qᵥ⁺ v against χ²(q), or (T / q) / ((r σ̂₀² − T) / (r − q)) against F(q, r − q); q counts the directions with redundancy.
 * A reading without redundancy is "untestable": its residual is 0 whatever it says.
 * @param options `level` of this single test, 0.001 unless given (Baarda's choice); `varianceFactor` to test against the estimated scatter.
 * @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError}
 * @throws {DegreesOfFreedomError} an estimated factor whose redundancy does not exceed q.  Cost O(m³).
 */
export function residualTest(
  { residual, noiseCovariance, residualCovariance }: AdjustedReading,
  { level = 0.001, varianceFactor }: { level?: number; varianceFactor?: EstimatedFactor | undefined } = {},
): ResidualVerdict {
  requireLevel("level", level);
  const space = residualSpace(noiseCovariance, residualCovariance, residual.length);
  const w = standardizedResidual(space, residual);
  if (w.length === 0) return untestable(level);
  const { statistic, distribution, sides } = w.length === 1 ? scalar(w[0]!, varianceFactor) : joint(w, varianceFactor);
  const test = upperTest(Math.abs(statistic), distribution, level / sides);
  const probability = sides * test.probability;
  const suspect = Math.abs(statistic) > test.threshold;
  return {
    ...test,
    statistic,
    level,
    probability,
    verdict: suspect ? "suspect" : "fine",
    because:
      `The residual is ${inWords(w.length === 1 ? Math.abs(w[0]!) : Math.sqrt(sumOfSquares(w)))} times its own standard deviation` +
      `${w.length === 1 ? "" : ` (${w.length} components together)`}${varianceFactor ? `, or ${inWords(Math.abs(statistic))} as ${distribution.name} against the scatter found` : ""}: ` +
      `a right reading shows that much or more ${percent(probability)} of the time, and the test calls out the outermost ${percent(level)}.`,
  };
}

interface Statistic {
  readonly statistic: number;
  readonly distribution: Distribution;
  /** 2 when either sign counts. */
  readonly sides: 1 | 2;
}

function scalar(w: number, factor: EstimatedFactor | undefined): Statistic {
  if (!factor) return { statistic: w, distribution: normal, sides: 2 };
  const distribution = popeTau(factor.redundancy);
  return { statistic: w / Math.sqrt(requirePositive("varianceFactor.value", factor.value)), distribution, sides: 2 };
}

function joint(w: Float64Array, factor: EstimatedFactor | undefined): Statistic {
  const q = w.length;
  const squares = sumOfSquares(w);
  if (!factor) return { statistic: squares, distribution: chiSquare(q), sides: 1 };
  const rest = requireDegreesOfFreedom("varianceFactor.redundancy", factor.redundancy) - q;
  if (rest <= 0)
    throw new DegreesOfFreedomError(
      "varianceFactor.redundancy",
      factor.redundancy,
      `The reading itself takes ${q}, and nothing is left to judge it by: add readings, or test against the stated variance factor.`,
    );
  // what the other residuals scatter; rounding may leave a little less than nothing
  const others = Math.max(0, factor.redundancy * requirePositive("varianceFactor.value", factor.value) - squares);
  return { statistic: squares / q / (others / rest), distribution: fisherF(q, rest), sides: 1 };
}

function untestable(level: number): ResidualVerdict {
  return {
    statistic: 0,
    distribution: "none",
    degreesOfFreedom: [0],
    level,
    threshold: Infinity,
    probability: 1,
    verdict: "untestable",
    because:
      "No other reading controls this one: its residual is zero whatever it says. Measure the same thing once more to be able to judge it.",
  };
}
