// How many digits an answer is good for: a bound on what rounding does to the blocks of Σ, from the conditions of base and leaves and from
// what the ledger has made smaller and larger.

/** What a bound is made of. Σ₀: of base and leaves alone; Σ₁: with the ledger's added rows in as well; Σ: with its removed rows out. */
export interface ErrorSources {
  /** κ of the base: ‖D Σ D‖ with D² the diagonal of its Λ. */
  readonly baseCondition: number;
  /** What rounding in the base's factor is multiplied by: κ when it came from Λ, √κ when it came from the rows. */
  readonly factorCondition: number;
  /** tr D Σ₀ D over the leaves, D² being the squared lengths of the columns that were rotated. */
  readonly leafCondition: number;
  /** At least λ such that Σ₀ ≤ λ Σ₁, and such that Σ ≤ λ Σ₁. */
  readonly addedGrowth: number;
  readonly removedGrowth: number;
  /** tr A Σ₀ Aᵀ of the removed rows: the size of the terms that their pivots are left over from. */
  readonly removedReach: number;
}

/** What a unit of rounding comes to, all constants of the analysis together. Measured with 1 ε in its place, on 5 000 random networks of up
 *  to some thirty unknowns with weights 12 orders of magnitude apart, changing over 12 commits, kept blocks and fresh ones (75 000 readings):
 *  half of the errors were below 0.07 of the bound, one in a thousand above 1.6 times it, the largest 3.5 times it. */
const ROUNDING = 8 * Number.EPSILON;

/**
 * A bound on |ΔΣᵢⱼ| ÷ √(Σᵢᵢ Σⱼⱼ) of blocks computed through base, leaves and ledger, to first order.
 * - Summing up Λ and factoring it commit an error |ΔΛᵢⱼ| ≤ γ √(Λᵢᵢ Λⱼⱼ), which moves eᵀ Σ e by γ κ of itself, times what removed rows have
 *   made larger (Demmel, LAPACK Working Note 14, 1989; Higham, "Accuracy and Stability of Numerical Algorithms", 2nd ed., ch. 10).
 * - Reflecting the rows A themselves commits an error ‖E D⁻¹‖ ≤ γ of them, which moves eᵀ Σ e by 2 (A Σ e)ᵀ (E Σ e), at most 2 γ √κ of itself,
 *   times the same: ‖A Σ e‖² and ‖E Σ e‖² ÷ (γ² κ) are each at most eᵀ Σ e times what removed rows have made larger (Higham, ch. 19).
 * - Rotated rows and the columns solved for commit errors of rows, of which the square root of the condition counts (Golub, Van Loan,
 *   section 5.3). A column x = L⁻¹ e has length √(eᵀ Σ₀ e), and with P = (I + V C Vᵀ)⁻¹ its error enters eᵀ Σ e = xᵀ P x as 2 δxᵀ P x, at
 *   most 2 √(δxᵀ P δx) √(eᵀ Σ e): the square root of what the ledger has made smaller counts. The ledger's own columns do the same.
 * - Its sums are of terms that much larger than what they leave.
 */
export function firstOrderBound({
  baseCondition,
  factorCondition,
  leafCondition,
  addedGrowth,
  removedReach,
  removedGrowth,
}: ErrorSources): number {
  const growth = addedGrowth + removedReach * removedGrowth;
  const columns = Math.sqrt((baseCondition + leafCondition) * removedGrowth * growth);
  return ROUNDING * (factorCondition * removedGrowth + columns + growth);
}

/** The bound on what weights have lost that were whitened by a matrix of this condition; none with deviations. */
export const boundOfNoise = (condition: number): number => (condition > 1 ? ROUNDING * condition : 0);

/** The bound on blocks from a base alone. */
export const boundOfBase = (condition: number, factorCondition: number): number =>
  firstOrderBound({ baseCondition: condition, factorCondition, leafCondition: 0, addedGrowth: 1, removedReach: 0, removedGrowth: 1 });

/** What a bound to first order stands for: (Λ + ΔΛ)⁻¹ is off by b ÷ (1 − b) when Λ is off by b. From 1 on nothing can be said. */
export const closedBound = (b: number): number => (b < 1 ? b / (1 - b) : Number.POSITIVE_INFINITY);
