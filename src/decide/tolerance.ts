// Does a state meet its limit at a confidence?
// Source: the confidence region of the χ² quantile (ellipse.ts); the worst direction decides.
import { chiSquare } from "./distributions.js";
import { axesOf, confidenceScale } from "./ellipse.js";
import { ArgumentError } from "./errors.js";
import { requirePositive } from "./require.js";
import type { Matrix } from "./small-matrix.js";
import { inWords, percent, type Verdict } from "./verdict.js";

export interface ToleranceVerdict extends Verdict<"meets the limit" | "fails the limit"> {
  readonly confidence: number;
  /** Statistic over limit: above 1 the state fails. */
  readonly share: number;
  /** Unit vector of the worst direction, in the state's own components. */
  readonly worstDirection: Float64Array;
}

/**
 * The largest semi-axis of the confidence region, √(χ² quantile · λₘₐₓ(Σ)), against a limit. For the difference of two states pass
 * Σ₁₁ + Σ₂₂ − Σ₁₂ − Σ₂₁.
 * @param covariance Σ, `dimension` × `dimension`, all components of one unit; the limit in that unit.
 * @param options `confidence` 0.95 unless given; `name` for the sentence.
 * @throws {LevelError}  @throws {ArgumentError} the limit is not positive.  @throws {CovarianceError}
 * The probability is the chance that the true point lies outside a ball of the limit's radius, taken as if every axis were the worst one.
 */
export function toleranceVerdict(
  { covariance, dimension, limit }: { covariance: Matrix; dimension: number; limit: number },
  { confidence = 0.95, name = "The state" }: { confidence?: number; name?: string } = {},
): ToleranceVerdict {
  if (!(Number.isInteger(dimension) && dimension > 0))
    throw new ArgumentError("dimension", dimension, "give the number of the state's unknowns.");
  requirePositive("limit", limit);
  const scale = confidenceScale(dimension, confidence);
  const { values, vectors } = axesOf(covariance, dimension);
  const deviation = Math.sqrt(values[0]!);
  const statistic = scale * deviation;
  const fails = statistic > limit;
  const share = statistic / limit;
  return {
    statistic,
    distribution: "chi-square",
    degreesOfFreedom: [dimension],
    level: 1 - confidence,
    threshold: limit,
    probability: chiSquare(dimension).sf((limit / deviation) ** 2),
    confidence,
    share,
    worstDirection: vectors[0]!,
    verdict: fails ? "fails the limit" : "meets the limit",
    because: `${name} is known to ${inWords(statistic)} in its worst direction with ${percent(confidence)} confidence, ${
      fails ? `${inWords(share)} times` : `within`
    } the limit of ${inWords(limit)}.`,
  };
}

/** Covariance of the difference of two states of one kind: Σ₁₁ + Σ₂₂ − Σ₁₂ − Σ₁₂ᵀ, row-major. All arguments `dimension`², row-major. */
export function differenceCovariance(first: Float64Array, second: Float64Array, cross: Float64Array, dimension: number): Float64Array {
  return first.map((value, at) => {
    const [i, j] = [Math.floor(at / dimension), at % dimension];
    return value + second[at]! - cross[at]! - cross[j * dimension + i]!;
  });
}
