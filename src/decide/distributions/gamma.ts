// Regularized incomplete gamma functions and their inverse.
// Sources: DLMF 8.11.4 (series of P), 8.9.2 (continued fraction of Q); W. J. Lentz, Applied Optics 15 (1976) 668, in the form of
// Thompson, Barnett, J. Comput. Phys. 64 (1986) 490; start values Wilson, Hilferty (1931): Abramowitz, Stegun 26.4.17.
import { deviance, logFactorial, stirlingRemainder } from "./saddle-point.js";
import { fractionSettled, lowerNormalGuess, smallestLog, type Tails, tailRoot } from "./tails.js";

/** xᵃ e⁻ˣ / Γ(a + 1) for a, x > 0: the Poisson probability of a at mean x when a is whole. */
export function gammaPrefactor(a: number, x: number): number {
  return Math.exp(-stirlingRemainder(a) - deviance(a, x)) / Math.sqrt(2 * Math.PI * a);
}

/** P(a, x) and Q(a, x) = 1 − P for a > 0, x ≥ 0. Each is exact to about 13 digits relative to itself where x lies on its side of a + 1.
 *  Cost O(√a) near x = a, less elsewhere. */
export function gammaTails(a: number, x: number): Tails {
  if (x <= 0) return { lower: 0, upper: 1, density: 0 };
  if (x === Infinity) return { lower: 1, upper: 0, density: 0 };
  const prefactor = gammaPrefactor(a, x);
  const density = a * prefactor;
  if (x < a + 1) {
    let term = 1;
    let sum = 1;
    for (let n = 1; term > sum * 1e-17; ++n) {
      term *= x / (a + n);
      sum += term;
    }
    const lower = prefactor * sum;
    return { lower, upper: 1 - lower, density };
  }
  // Q = (a · prefactor) / (x + 1 − a − 1(1 − a) / (x + 3 − a − 2(2 − a) / (x + 5 − a − …)))
  let b = x + 1 - a;
  let c = Infinity;
  let d = 1 / b;
  let fraction = d;
  for (let n = 1, change = 0; Math.abs(change - 1) > fractionSettled; ++n) {
    const numerator = n * (a - n);
    b += 2;
    d = 1 / (b + numerator * d);
    c = b + numerator / c;
    change = c * d;
    fraction *= change;
  }
  const upper = density * fraction;
  return { lower: 1 - upper, upper, density };
}

/** x with P(a, x) = p (`"lower"`) or Q(a, x) = p (`"upper"`), for 0 < p ≤ ½: Newton's method on the logarithm of that tail over ln x. */
export function gammaQuantile(a: number, p: number, side: "lower" | "upper"): number {
  const z = lowerNormalGuess(p) * (side === "lower" ? 1 : -1);
  const cubeRoot = 1 - 1 / (9 * a) + z / (3 * Math.sqrt(a));
  let start = Math.log(a) + 3 * Math.log(Math.max(cubeRoot, 1e-3));
  if (side === "lower") {
    const powerLaw = (Math.log(p) + logFactorial(a)) / a; // P ≈ xᵃ / Γ(a + 1), an upper bound of P
    if (powerLaw < smallestLog) return Math.exp(powerLaw); // the next factor, 1 − a x / (a + 1), is 1 to the last digit
    start = Math.max(start, powerLaw);
  }
  return Math.exp(tailRoot(start, p, side, (s) => gammaTails(a, Math.exp(s))));
}
