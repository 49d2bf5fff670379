// What the incomplete gamma, the incomplete beta and the non-central sums share: two tails, and the root of a tail.

/** Both tails at one point, and the density over the variable `tailRoot` moves in: dP/ds = −dQ/ds. */
export interface Tails {
  lower: number;
  upper: number;
  density: number;
}

/** A continued fraction stands still when its factor is 1 within this: one factor is a product of two roundings, so up to 2 ulp off 1. */
export const fractionSettled = 4.5e-16;

/** ln of the smallest normal double: below it a point is found by the power law of the tail alone. */
export const smallestLog: number = Math.log(2.3e-308);

/** z ≤ 0 with Φ(z) ≈ p to 4.5e−4, for 0 < p ≤ ½: a start value only. Source: Hastings (1955), Abramowitz, Stegun 26.2.23. */
export function lowerNormalGuess(p: number): number {
  const t = Math.sqrt(-2 * Math.log(p));
  return (2.515517 + t * (0.802853 + 0.010328 * t)) / (1 + t * (1.432788 + t * (0.189269 + 0.001308 * t))) - t;
}

/** s with tail(s) = p: Newton's method on ln tail, which is nearly straight far out, where the tail itself is flat to the last digit.
 *  The gamma and beta densities are log-concave over ln x and ln(x / (1 − x)), so ln tail is concave and Newton's steps close in from one side;
 *  a bracket, halved when a step leaves it, covers the non-central density, which need not be. */
export function tailRoot(start: number, p: number, side: "lower" | "upper", tailsAt: (s: number) => Tails): number {
  const rising = side === "lower" ? 1 : -1;
  let low = -Infinity;
  let high = Infinity;
  let s = start;
  let stride = 1;
  for (;;) {
    const { [side]: tail, density } = tailsAt(s);
    const error = Math.log(tail / p); // as a ratio: the difference of two logarithms near −700 would lose three digits
    if (error * rising > 0) high = s;
    else low = s;
    let next = s - (rising * error * tail) / density;
    if (!(next >= low && next <= high && Math.abs(next) < Infinity)) {
      if (low === -Infinity) next = high - stride;
      else if (high === Infinity) next = low + stride;
      else next = (low + high) / 2;
      stride *= 2;
    }
    const step = Math.abs(next - s);
    s = next;
    // Newton doubles its digits: a step of 1e−10 leaves only rounding. A halved bracket ends here too, once it is that narrow.
    if (step <= 1e-10 * Math.max(1, Math.abs(s)) && (Math.abs(error) < 1e-6 || high - low <= 1e-15 * Math.max(1, Math.abs(s)))) return s;
  }
}
