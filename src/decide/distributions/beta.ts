// Regularized incomplete beta functions and their inverse, in the odds x / (1 − x), so that neither end of (0, 1) loses digits.
// Sources: DLMF 8.17.22 (continued fraction), evaluated as in gamma.ts; prefactor by Loader's saddle-point form; 8.17.4 (symmetry).
import { deviance, logFactorial, stirlingRemainder } from "./saddle-point.js";
import { fractionSettled, lowerNormalGuess, smallestLog, type Tails, tailRoot } from "./tails.js";

/** xᵃ yᵇ / B(a, b) with y = 1 − x given apart: the density over ln(x / y). */
function betaDensity(a: number, b: number, x: number, y: number): number {
  const n = a + b;
  const stirling = stirlingRemainder(n) - stirlingRemainder(a) - stirlingRemainder(b);
  return Math.sqrt((a * b) / (2 * Math.PI * n)) * Math.exp(stirling - deviance(a, n * x) - deviance(b, n * y));
}

/** I_x(a, b) / density, x at or below the mean: the continued fraction 1 / (a (1 + d₁ / (1 + d₂ / …))). */
function betaFraction(a: number, b: number, x: number): number {
  let c = 1;
  let d = 1 / (1 - ((a + b) * x) / (a + 1));
  let fraction = d;
  for (let m = 1, change = 0; Math.abs(change - 1) > fractionSettled; ++m) {
    const even = (m * (b - m) * x) / ((a + 2 * m - 1) * (a + 2 * m));
    d = 1 / (1 + even * d);
    c = 1 + even / c;
    fraction *= c * d;
    const odd = (-(a + m) * (a + b + m) * x) / ((a + 2 * m) * (a + 2 * m + 1));
    d = 1 / (1 + odd * d);
    c = 1 + odd / c;
    change = c * d;
    fraction *= change;
  }
  return fraction / a;
}

/** I_x(a, b) and 1 − I_x(a, b) at x = odds / (1 + odds), for a, b > 0, odds ≥ 0. Each is exact to about 13 digits relative to itself
 *  where x lies on its side of the mean. Cost O(√max(a, b)) near the mean, less elsewhere. */
export function betaTails(a: number, b: number, odds: number): Tails {
  if (odds <= 0) return { lower: 0, upper: 1, density: 0 };
  if (odds === Infinity) return { lower: 1, upper: 0, density: 0 };
  const x = odds / (1 + odds);
  const y = 1 / (1 + odds);
  const density = betaDensity(a, b, x, y);
  if (x < (a + 1) / (a + b + 2)) {
    const lower = density * betaFraction(a, b, x);
    return { lower, upper: 1 - lower, density };
  }
  const upper = density * betaFraction(b, a, y);
  return { lower: 1 - upper, upper, density };
}

/** ln odds with I_x(a, b) = p, for 0 < p ≤ ½; the upper tail of (a, b) is the lower one of (b, a), with the sign of ln odds turned.
 *  The logarithm, because the odds themselves can pass the range of a double where their root does not. */
export function betaLogOdds(a: number, b: number, p: number): number {
  const logBeta = logFactorial(a) + logFactorial(b) - logFactorial(a + b) + Math.log((a + b) / b); // ln(a B(a, b))
  const powerLaw = (Math.log(p) + logBeta) / a; // I ≈ xᵃ / (a B(a, b))
  if (powerLaw < smallestLog) return powerLaw; // no other term of the series in x counts, and x itself is no normal double
  const guess = Math.log(a / b) + lowerNormalGuess(p) * Math.sqrt(1 / a + 1 / b);
  return tailRoot(Math.max(powerLaw, guess), p, "lower", (s) => betaTails(a, b, Math.exp(s)));
}
