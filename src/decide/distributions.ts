// The distributions that the decisions test against, from published formulas (see distributions/), 12 digits or more in either tail.
import { betaLogOdds, betaTails } from "./distributions/beta.js";
import { type Distribution, positive, symmetric } from "./distributions/distribution.js";
import { gammaQuantile, gammaTails } from "./distributions/gamma.js";
import { noncentralTails } from "./distributions/noncentral.js";
import { tailRoot } from "./distributions/tails.js";
import { DegreesOfFreedomError } from "./errors.js";
import { requireDegreesOfFreedom, requireNotNegative } from "./require.js";

export type { Distribution } from "./distributions/distribution.js";

/** The standard normal distribution: X² is χ² with one degree of freedom. Source: DLMF 7.11.1. */
export const normal: Distribution = symmetric(
  "normal",
  [],
  (x) => gammaTails(0.5, (x * x) / 2),
  (p, side) => Math.sqrt(2 * gammaQuantile(0.5, p, side)),
);

/** χ² with ν > 0 degrees of freedom: cdf P(ν/2, x/2). Source: Abramowitz, Stegun 26.4.1, 26.4.19.
 *  @throws {DegreesOfFreedomError} ν is not positive and finite. */
export function chiSquare(degreesOfFreedom: number): Distribution {
  const a = requireDegreesOfFreedom("degreesOfFreedom", degreesOfFreedom) / 2;
  return positive(
    "chi-square",
    [degreesOfFreedom],
    (x) => gammaTails(a, x / 2),
    (p, side) => 2 * gammaQuantile(a, p, side),
  );
}

/** Student's t with ν > 0 degrees of freedom: P(|T| ≤ t) = I_x(½, ν/2), x = t² / (ν + t²). Source: Abramowitz, Stegun 26.7.1.
 *  @throws {DegreesOfFreedomError} ν is not positive and finite. */
export function studentT(degreesOfFreedom: number): Distribution {
  const nu = requireDegreesOfFreedom("degreesOfFreedom", degreesOfFreedom);
  return symmetric(
    "Student t",
    [nu],
    (t) => betaTails(0.5, nu / 2, (t / nu) * t),
    (p, side) => Math.sqrt(nu) * Math.exp((side === "lower" ? betaLogOdds(0.5, nu / 2, p) : -betaLogOdds(nu / 2, 0.5, p)) / 2),
  );
}

/** Fisher's F with ν₁ > 0 and ν₂ > 0 degrees of freedom: cdf I_x(ν₁/2, ν₂/2), x = ν₁F / (ν₁F + ν₂). Source: Abramowitz, Stegun 26.6.2.
 *  @throws {DegreesOfFreedomError} either is not positive and finite. */
export function fisherF(numerator: number, denominator: number): Distribution {
  const a = requireDegreesOfFreedom("numerator", numerator) / 2;
  const b = requireDegreesOfFreedom("denominator", denominator) / 2;
  return positive(
    "F",
    [numerator, denominator],
    (x) => betaTails(a, b, (x / b) * a),
    (p, side) => (b / a) * Math.exp(side === "lower" ? betaLogOdds(a, b, p) : -betaLogOdds(b, a, p)),
  );
}

/** χ² with ν > 0 degrees of freedom and non-centrality λ ≥ 0, the sum of the squared means (mean of the distribution: ν + λ).
 *  It gives the power of a χ² test against a bias. Source: Abramowitz, Stegun 26.4.25.
 *  @throws {DegreesOfFreedomError} ν is not positive and finite.  @throws {ArgumentError} λ is negative or not finite. */
export function noncentralChiSquare(degreesOfFreedom: number, noncentrality: number): Distribution {
  const a = requireDegreesOfFreedom("degreesOfFreedom", degreesOfFreedom) / 2;
  const mean = requireNotNegative("noncentrality", noncentrality) / 2;
  const central = chiSquare(degreesOfFreedom);
  if (mean === 0) return { ...central, name: "non-central chi-square" };
  const start = Math.log(a + mean);
  return positive(
    "non-central chi-square",
    [degreesOfFreedom],
    (x) => noncentralTails(a, mean, x / 2),
    (p, side) => 2 * Math.exp(tailRoot(start, p, side, (s) => noncentralTails(a, mean, Math.exp(s)))),
  );
}

/** Pope's τ of a residual divided by its own standard deviation when the variance factor is estimated from the same r redundant readings:
 *  τ = t √r / √(r − 1 + t²) with t of Student's distribution at r − 1; |τ| ≤ √r. Source: A. J. Pope, "The statistics of residuals and the
 *  detection of outliers", NOAA Technical Report NOS 65 NGS 1 (1976).
 *  @throws {DegreesOfFreedomError} r ≤ 1: with one surplus reading every |τ| is 1 and nothing can be told apart. */
export function popeTau(redundancy: number): Distribution {
  const r = requireDegreesOfFreedom("redundancy", redundancy);
  if (r <= 1)
    throw new DegreesOfFreedomError(
      "redundancy",
      r,
      "With a variance factor estimated from one surplus reading every residual looks alike: add a reading, or test against the stated variance factor.",
    );
  const t = studentT(r - 1);
  const toStudent = (tau: number) =>
    Math.abs(tau) >= Math.sqrt(r) ? Math.sign(tau) * Infinity : (tau * Math.sqrt(r - 1)) / Math.sqrt(r - tau * tau);
  const fromStudent = (value: number) => Math.sign(value) * Math.sqrt(r / (1 + (r - 1) / value / value));
  return {
    name: "Pope tau",
    degreesOfFreedom: [r],
    cdf: (tau) => t.cdf(toStudent(tau)),
    sf: (tau) => t.sf(toStudent(tau)),
    quantile: (p) => fromStudent(t.quantile(p)),
    isf: (p) => fromStudent(t.isf(p)),
  };
}
