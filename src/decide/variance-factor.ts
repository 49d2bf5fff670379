// Do the residuals scatter as the stated standard deviations say? The global test of the variance factor.
// Source: Baarda (1968), ch. 3; K. R. Koch, "Parameter Estimation and Hypothesis Testing in Linear Models" (1999), 4.2.4.
import { chiSquare } from "./distributions.js";
import { requireDegreesOfFreedom, requireLevel, requireNotNegative } from "./require.js";
import { inWords, percent, type Verdict } from "./verdict.js";

export interface VarianceFactorVerdict extends Verdict<"as stated" | "more than stated" | "less than stated"> {
  /** σ̂₀² = Ω / r: 1 when the stated standard deviations are right. */
  readonly varianceFactor: number;
  /** The statistic below which the residuals are too small; 0 in the one-sided test. */
  readonly lowerThreshold: number;
}

/**
 * Ω = vᵀ R⁻¹ v against χ²(r).
 * @param input `weightedSquares` Ω, dimensionless; `redundancy` r = readings minus unknowns.
 * @param options `level` 0.05 unless given; `sides` "both" (half the level on either side) or "upper" (only too large counts).
 * @throws {DegreesOfFreedomError} r is not positive.  @throws {ArgumentError} Ω is negative.  @throws {LevelError}
 */
export function varianceFactorTest(
  { weightedSquares, redundancy }: { weightedSquares: number; redundancy: number },
  { level = 0.05, sides = "both" }: { level?: number; sides?: "both" | "upper" } = {},
): VarianceFactorVerdict {
  const distribution = chiSquare(requireDegreesOfFreedom("redundancy", redundancy));
  requireNotNegative("weightedSquares", weightedSquares);
  const share = requireLevel("level", level) / (sides === "both" ? 2 : 1);
  const threshold = distribution.isf(share);
  const lowerThreshold = sides === "both" ? distribution.quantile(share) : 0;
  const upper = distribution.sf(weightedSquares);
  const varianceFactor = weightedSquares / redundancy;
  const verdict = weightedSquares > threshold ? "more than stated" : weightedSquares < lowerThreshold ? "less than stated" : "as stated";
  // With many readings the usual range is narrow about 1, and three digits would not tell its ends apart.
  const width = Math.sqrt(threshold / redundancy) - Math.sqrt(lowerThreshold / redundancy);
  const written = (factor: number) => inWords(Math.sqrt(factor), 3 + Math.max(0, Math.ceil(-Math.log10(width)) - 1));
  const meaning = {
    "as stated": "chance alone explains it",
    "more than stated": "look for a blunder, an effect left out of the model, or standard deviations stated too small",
    "less than stated": "the standard deviations are stated too large, or readings were counted twice",
  }[verdict];
  return {
    statistic: weightedSquares,
    distribution: distribution.name,
    degreesOfFreedom: [redundancy],
    level,
    threshold,
    lowerThreshold,
    probability: sides === "both" ? Math.min(1, 2 * Math.min(upper, distribution.cdf(weightedSquares))) : upper,
    varianceFactor,
    verdict,
    because: `The readings scatter ${written(varianceFactor)} times as much as their standard deviations say, between ${written(
      lowerThreshold / redundancy,
    )} and ${written(threshold / redundancy)} times is usual (all but ${percent(level)} of the time): ${meaning}.`,
  };
}
