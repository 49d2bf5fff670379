// The face of every distribution here: both tails and both inverses, checked at the border.
import { ArgumentError } from "../errors.js";
import { requireLevel } from "../require.js";
import type { Tails } from "./tails.js";

/** A continuous distribution of one number. Upper tails have functions of their own, because 1 − cdf(x) has no digits left far out. */
export interface Distribution {
  /** `"normal"`, `"chi-square"`, `"Student t"`, `"F"`, `"non-central chi-square"`, `"Pope tau"`. */
  readonly name: string;
  /** None for the normal, one for χ², t and τ, two for F. */
  readonly degreesOfFreedom: readonly number[];
  /** P(X ≤ x). @throws {ArgumentError} x is NaN. */
  cdf(x: number): number;
  /** P(X > x), the upper tail. @throws {ArgumentError} x is NaN. */
  sf(x: number): number;
  /** x with cdf(x) = p. @throws {LevelError} p is outside (0, 1). */
  quantile(p: number): number;
  /** x with sf(x) = p: the critical value of a one-sided test at level p. @throws {LevelError} p is outside (0, 1). */
  isf(p: number): number;
}

function requireNumber(x: number): number {
  if (Number.isNaN(x)) throw new ArgumentError("x", x, "the statistic is not a number; look for an empty or unmeasured value before it.");
  return x;
}

/** A distribution on x ≥ 0 from its tails and the point where a tail p ≤ ½ is reached. */
export function positive(
  name: string,
  degreesOfFreedom: readonly number[],
  tails: (x: number) => Tails,
  root: (p: number, side: "lower" | "upper") => number,
): Distribution {
  // 1 − p is exact for p ≥ ½, so the smaller tail is always the one that is met
  const inverse = (p: number, side: "lower" | "upper") => (p <= 0.5 ? root(p, side) : root(1 - p, side === "lower" ? "upper" : "lower"));
  return {
    name,
    degreesOfFreedom,
    cdf: (x) => tails(requireNumber(x)).lower,
    sf: (x) => tails(requireNumber(x)).upper,
    quantile: (p) => inverse(requireLevel("p", p), "lower"),
    isf: (p) => inverse(requireLevel("p", p), "upper"),
  };
}

/** A distribution symmetric about 0 from that of its magnitude: tails of |X| at |x|, and the |x| where such a tail p ≤ ½ is reached. */
export function symmetric(
  name: string,
  degreesOfFreedom: readonly number[],
  tails: (magnitude: number) => Tails,
  root: (p: number, side: "lower" | "upper") => number,
): Distribution {
  const upperTail = (x: number) => {
    const { lower, upper } = tails(Math.abs(x));
    return x >= 0 ? upper / 2 : 0.5 + lower / 2;
  };
  const upperPoint = (p: number): number => {
    if (p > 0.5) return -upperPoint(1 - p);
    if (p === 0.5) return 0;
    return p < 0.25 ? root(2 * p, "upper") : root(1 - 2 * p, "lower"); // near the middle |x| is small, and found by its own lower tail
  };
  return {
    name,
    degreesOfFreedom,
    cdf: (x) => upperTail(-requireNumber(x)),
    sf: (x) => upperTail(requireNumber(x)),
    quantile: (p) => -upperPoint(requireLevel("p", p)),
    isf: (p) => upperPoint(requireLevel("p", p)),
  };
}
