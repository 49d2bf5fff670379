// Is an estimator as sure as it has a right to be? Normalized squares of innovations or errors over a run, and their whiteness.
// Source: Y. Bar-Shalom, X. R. Li, T. Kirubarajan (2001), 5.4; portmanteau statistic: G. M. Ljung, G. E. P. Box, Biometrika 65 (1978) 297.
import { chiSquare } from "./distributions.js";
import { ArgumentError, DegreesOfFreedomError } from "./errors.js";
import { requireLevel } from "./require.js";
import { vector } from "./small-matrix.js";
import { inWords, percent, upperTest, type Verdict } from "./verdict.js";

export interface ConsistencyVerdict extends Verdict<"consistent" | "too sure" | "too cautious"> {
  readonly lowerThreshold: number;
  /** Mean square over its expected value: 1 when the stated covariances are right. */
  readonly ratio: number;
}

/**
 * Normalized innovation squared (νᵀ S⁻¹ ν) or normalized estimation error squared (eᵀ Σ⁻¹ e), summed over a run, against χ² of all dimensions.
 * Innovations of one run are independent when the estimator is right; errors are so over independent runs only, not along one run.
 * @param squares one a step or run, dimensionless.  @param dimensions of each, or one number for all.
 * @param options `level` 0.05 unless given, half on either side.
 * @throws {ArgumentError} empty, negative or not finite.  @throws {DegreesOfFreedomError}  @throws {LevelError}
 */
export function normalizedSquaresTest(
  { squares, dimensions }: { squares: ArrayLike<number>; dimensions: ArrayLike<number> | number },
  { level = 0.05 }: { level?: number } = {},
): ConsistencyVerdict {
  const d = vector("squares", squares);
  const negative = d.findIndex((value) => value < 0);
  if (negative >= 0) throw new ArgumentError(`squares[${negative}]`, d[negative], "a square cannot be negative.");
  const each = typeof dimensions === "number" ? new Float64Array(d.length).fill(dimensions) : vector("dimensions", dimensions, d.length);
  const bad = each.findIndex((value) => !(value > 0));
  if (bad >= 0)
    throw new DegreesOfFreedomError(`dimensions[${bad}]`, each[bad]!, "Give the dimension of each innovation or error, 1 or more.");
  const degrees = each.reduce((sum, value) => sum + value, 0);
  const distribution = chiSquare(degrees);
  const statistic = d.reduce((sum, value) => sum + value, 0);
  const share = requireLevel("level", level) / 2;
  const threshold = distribution.isf(share);
  const lowerThreshold = distribution.quantile(share);
  const ratio = statistic / degrees;
  const verdict = statistic > threshold ? "too sure" : statistic < lowerThreshold ? "too cautious" : "consistent";
  const meaning = {
    consistent: "the stated covariances fit the run",
    "too sure": "the stated covariances are too small for what happened, so noise is understated or an effect is missing",
    "too cautious": "the stated covariances are larger than what happened, so noise is overstated",
  }[verdict];
  return {
    statistic,
    distribution: distribution.name,
    degreesOfFreedom: [degrees],
    level,
    threshold,
    lowerThreshold,
    probability: Math.min(1, 2 * Math.min(distribution.sf(statistic), distribution.cdf(statistic))),
    ratio,
    verdict,
    because: `Over ${d.length} steps the squares are ${inWords(ratio)} times what the covariances say, between ${inWords(lowerThreshold / degrees)} and ${inWords(
      threshold / degrees,
    )} is usual (all but ${percent(level)} of the time): ${meaning}.`,
  };
}

export interface WhitenessVerdict extends Verdict<"white" | "correlated in time"> {
  /** ρ at lag 1, 2, …: Σ uₖᵀ uₖ₊ₗ / Σ uₖᵀ uₖ. */
  readonly correlations: Float64Array;
}

/**
 * Innovations of a right estimator are uncorrelated in time: Σₗ ρₗ² N (N m + 2) / (N − l) against χ²(lags), N innovations of
 * dimension m.
 * @param innovations N × m, each whitened: L⁻¹ ν with S = L Lᵀ; a common scale does no harm.
 * @param options `lags` from 1, at most N / 4: 10 or N / 4 unless given; `level` 0.05 unless given.
 * @throws {ArgumentError} fewer than 8 innovations, too many lags, or all of them zero.  @throws {LevelError}
 */
export function whitenessTest(
  { innovations, dimension: m }: { innovations: ArrayLike<number>; dimension: number },
  { level = 0.05, lags }: { level?: number; lags?: number } = {},
): WhitenessVerdict {
  const u = vector("innovations", innovations);
  const n = u.length / m;
  if (!(Number.isInteger(n) && n >= 8))
    throw new ArgumentError("length of innovations", u.length, `give 8 or more innovations of ${m} numbers each.`);
  const most = Math.floor(n / 4);
  const used = lags ?? Math.min(10, most);
  if (!(Number.isInteger(used) && used >= 1 && used <= most)) throw new ArgumentError("lags", used, `${n} innovations allow 1 to ${most}.`);
  const product = (lag: number) => {
    let sum = 0;
    for (let k = 0; k < u.length - lag * m; ++k) sum += u[k]! * u[k + lag * m]!;
    return sum;
  };
  const power = product(0);
  if (power === 0) throw new ArgumentError("innovations", "all zero", "give the innovations of the run, not its residuals after the fact.");
  const correlations = Float64Array.from({ length: used }, (_, k) => product(k + 1) / power);
  // Ljung and Box's variance of ρₗ, (N − l) / (N (N + 2)), for m independent series
  const statistic = correlations.reduce((sum, rho, k) => sum + (rho * rho * n * m * (n + 2 / m)) / (n - k - 1), 0);
  const test = upperTest(statistic, chiSquare(used), level);
  const white = statistic <= test.threshold;
  const largest = correlations.reduce((best, rho, k) => (Math.abs(rho) > Math.abs(correlations[best]!) ? k : best), 0);
  return {
    ...test,
    correlations,
    verdict: white ? "white" : "correlated in time",
    because: `The largest correlation in time is ${inWords(correlations[largest]!)}, ${largest + 1} step${largest ? "s" : ""} apart; white innovations show such ones ${percent(
      test.probability,
    )} of the time, so ${white ? "nothing speaks against whiteness" : "a drift or a bias is left out of the model"}.`,
  };
}
