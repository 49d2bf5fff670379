// How large a bias must be for a χ² test to find it: the non-centrality at a level and a power.
// Source: W. Baarda, "A testing procedure for use in geodetic networks", Netherlands Geodetic Commission, Publ. on Geodesy 2 (5) (1968).
import { chiSquare, noncentralChiSquare } from "./distributions.js";
import { ArgumentError } from "./errors.js";
import { requireLevel } from "./require.js";

/** Values already found: the states and readings of a network share a few, and one search takes 0.2 ms. Emptied when it holds `most`. */
const found = new Map<string, number>();
const most = 64;

/**
 * λ₀ with P(χ²(q, λ₀) > critical value of χ²(q) at `level`) = `power`. For q = 1 the root √λ₀ is Baarda's δ₀, both tails counted.
 * @param degreesOfFreedom q > 0, the dimension of the bias.
 * @param level false-alarm rate of the test.  @param power chance to find the bias, above `level`.
 * @throws {LevelError} level or power is outside (0, 1).  @throws {ArgumentError} power ≤ level: no bias is needed for that.
 * Cost: about ten non-central tails; a repeat is looked up.
 */
export function noncentrality(degreesOfFreedom: number, level: number, power: number): number {
  const critical = chiSquare(degreesOfFreedom).isf(requireLevel("level", level));
  requireLevel("power", power);
  if (power <= level)
    throw new ArgumentError("power", power, `it must be above the level ${level}, which a test reaches without any bias.`);
  const key = `${degreesOfFreedom} ${level} ${power}`;
  const known = found.get(key);
  if (known !== undefined) return known;
  const lambda = search(degreesOfFreedom, critical, power);
  if (found.size >= most) found.clear();
  found.set(key, lambda);
  return lambda;
}

function search(degreesOfFreedom: number, critical: number, power: number): number {
  // The power rises with λ by ½ (sf(q + 2) − sf(q)) (Abramowitz, Stegun 26.4.25, differentiated): Newton inside a bracket.
  let low = 0;
  let high = Infinity;
  let lambda = critical + degreesOfFreedom;
  for (;;) {
    const reached = noncentralChiSquare(degreesOfFreedom, lambda).sf(critical);
    if (reached > power) high = lambda;
    else low = lambda;
    const slope = (noncentralChiSquare(degreesOfFreedom + 2, lambda).sf(critical) - reached) / 2;
    let next = lambda - (reached - power) / slope;
    if (!(next >= low && next <= high)) next = high === Infinity ? 2 * low : (low + high) / 2;
    const step = Math.abs(next - lambda);
    lambda = next;
    if (step <= 1e-9 * lambda && (Math.abs(reached - power) < 1e-8 || high - low <= 1e-14 * high)) return lambda;
  }
}
