// Non-central χ² as a Poisson mixture of central ones, summed with positive terms only.
// Sources: Abramowitz, Stegun 26.4.25; D. Benton, K. Krishnamoorthy, Comput. Stat. Data Anal. 43 (2003) 249 (recurrences).
import { gammaPrefactor, gammaTails } from "./gamma.js";
import type { Tails } from "./tails.js";

/** Tails at x of χ²(ν, λ) with a = ν / 2, mean = λ / 2 > 0 and half = x / 2: Σⱼ Poisson(j; mean) · P(a + j, half), and with Q.
 *  P grows by positive steps as j falls, Q as j rises, so each sum runs in its own direction. The smaller tail is exact to about 13 digits.
 *  Cost O(√λ + √(λ x)). */
export function noncentralTails(a: number, mean: number, half: number): Tails {
  if (half <= 0) return { lower: 0, upper: 1, density: 0 };
  if (half === Infinity) return { lower: 1, upper: 0, density: 0 };
  const weight = (j: number) => (j === 0 ? Math.exp(-mean) : gammaPrefactor(j, mean));
  // Outside mean ± 9√mean + 40 the Poisson weights sum to less than 1e−17; the factors left out there are the smaller ones in either sum.
  const spread = 9 * Math.sqrt(mean) + 40;
  let sum = 0;
  let density = 0;
  if (half < a + mean) {
    let j = Math.ceil(mean + spread);
    let lower = gammaTails(a + j, half).lower;
    for (; j >= 0; --j) {
      const w = weight(j);
      sum += w * lower;
      const index = a + j - 1; // P(a + j − 1) = P(a + j) + halfᵃ⁺ʲ⁻¹ e^−half / Γ(a + j)
      const step = gammaStep(index, half);
      density += w * step * half;
      lower += step;
    }
    return { lower: sum, upper: 1 - sum, density };
  }
  let j = Math.max(0, Math.floor(mean - spread));
  let upper = gammaTails(a + j, half).upper;
  for (let before = 0; ; ++j) {
    const w = weight(j);
    const term = w * upper;
    sum += term;
    const step = gammaStep(a + j - 1, half);
    density += w * step * half;
    const ratio = term / before; // falls with j, so the rest is below term · ratio / (1 − ratio)
    if (j > mean && (term === 0 || (ratio < 0.9 && term * ratio < sum * 1e-17))) return { lower: 1 - sum, upper: sum, density };
    before = term;
    upper += gammaStep(a + j, half);
  }
}

/** halfᵏ e^−half / Γ(k + 1), also for −1 < k ≤ 0, where it comes from the next one. */
function gammaStep(k: number, half: number): number {
  return k >= 1 ? gammaPrefactor(k, half) : (gammaPrefactor(k + 1, half) * (k + 1)) / half;
}
