// What rounding in the rotation of leaves is multiplied by: tr D Σ D over the leaves, from bounds on the covariances of their parents.
import type { Leaf } from "./leaf.js";

export class LeafCondition {
  /** For each leaf in order of arrival a bound on its covariance under base and leaves alone, d × d, and the sum up to it. */
  readonly #covariances: Float64Array[] = [];
  readonly #sums: number[] = [];

  get value(): number {
    return this.#sums.at(-1) ?? 0;
  }

  /** Takes in the next leaf.
   *  @param covariances for each parent in the base its covariance there, for one that is a leaf its number among them.
   *  Cost: a few d³.  Source: propagation of covariance, Σ = R⁻¹ (I + G Σ_pp Gᵀ) R⁻ᵀ; of k parents jointly Σ_pp ≤ k × its diagonal blocks. */
  add({ dimension: d, parents, numbers, squares }: Leaf, parentCovariances: readonly (Float64Array | number)[]): void {
    const sum = new Float64Array(d * d);
    for (let i = 0; i < d; i += 1) sum[i * (d + 1)] = 1;
    let total = this.value;
    let g = d * d;
    let column = d;
    for (const found of parentCovariances) {
      const covariance = typeof found === "number" ? this.#covariances[found]! : found;
      const dp = Math.sqrt(covariance.length);
      const half = new Float64Array(d * dp); // G Σ
      for (let v = 0; v < dp; v += 1)
        for (let u = 0; u < dp; u += 1)
          for (let i = 0; i < d; i += 1) half[v * d + i]! += numbers[g + u * d + i]! * covariance[v * dp + u]!;
      for (let v = 0; v < dp; v += 1)
        for (let j = 0; j < d; j += 1)
          for (let i = 0; i < d; i += 1) sum[j * d + i]! += parents.length * half[v * d + i]! * numbers[g + v * d + j]!;
      for (let u = 0; u < dp; u += 1) total += squares[column + u]! * covariance[u * (dp + 1)]!;
      g += d * dp;
      column += dp;
    }
    // R⁻¹ sum R⁻ᵀ: R is upper, its row i column i of L.
    for (let pass = 0; pass < 2; pass += 1) {
      for (let c = 0; c < d; c += 1) {
        for (let i = d - 1; i >= 0; i -= 1) {
          let x = sum[c * d + i]!;
          for (let j = i + 1; j < d; j += 1) x -= numbers[i * d + j]! * sum[c * d + j]!;
          sum[c * d + i] = x / numbers[i * (d + 1)]!;
        }
      }
      for (let j = 0; j < d; j += 1) for (let i = 0; i < j; i += 1) [sum[j * d + i], sum[i * d + j]] = [sum[i * d + j]!, sum[j * d + i]!];
    }
    for (let i = 0; i < d; i += 1) total += squares[i]! * sum[i * (d + 1)]!;
    this.#covariances.push(sum);
    this.#sums.push(total);
  }

  /** Forgets all but the first `count` leaves. */
  keep(count: number): void {
    this.#covariances.length = count;
    this.#sums.length = count;
  }
}
