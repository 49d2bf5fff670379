// Saddle-point form of the gamma and beta prefactors: the large parts cancel on paper, so none of the digits are lost by subtraction.
// Sources: C. Loader, "Fast and accurate computation of binomial probabilities" (2000); Stirling's series DLMF 5.11.1.

/** Coefficients B₂ₖ / (2k (2k − 1)) of Stirling's series, k = 1 … 7; at a ≥ 10 the first one left out is below 3e−17. */
const stirling = [1 / 12, -1 / 360, 1 / 1260, -1 / 1680, 1 / 1188, -691 / 360360, 1 / 156];

/** Remainder of Stirling's formula, δ(a) = ln Γ(a + 1) − (a + ½) ln a + a − ½ ln 2π, for a > 0; absolute error near 1e−15.
 *  Below 10 by the recurrence δ(a) = δ(a + 1) + (a + ½) ln(1 + 1/a) − 1. */
export function stirlingRemainder(a: number): number {
  let shifted = 0;
  for (; a < 10; a += 1) shifted += (a + 0.5) * Math.log1p(1 / a) - 1;
  let series = 0;
  for (let k = stirling.length - 1; k >= 0; --k) series = series / (a * a) + stirling[k]!;
  return shifted + series / a;
}

/** ln Γ(a + 1), a > 0. */
export function logFactorial(a: number): number {
  return (a + 0.5) * Math.log(a) - a + 0.5 * Math.log(2 * Math.PI) + stirlingRemainder(a);
}

/** Deviance a ln(a / x) + x − a ≥ 0 for a, x > 0, by a series where a and x are close (Loader's D₀). */
export function deviance(a: number, x: number): number {
  const difference = a - x;
  if (Math.abs(difference) >= 0.1 * (a + x)) return a * Math.log(a / x) - difference;
  const v = difference / (a + x); // ln(a / x) = 2 artanh v
  const square = v * v;
  let sum = difference * v;
  let term = 2 * a * v;
  for (let k = 3; ; k += 2) {
    term *= square;
    const next = sum + term / k;
    if (next === sum) return sum;
    sum = next;
  }
}
