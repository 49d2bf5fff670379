/** Addresses and sizes that a caller of the ledger reads. Addresses hold until the next call that makes room. */
import { addF64, atF64, f64At, i32At, setF64 } from "../memory/access";
import { allocateArray, release } from "../memory/heap";
import { logDeterminant } from "../factor/cholesky";
import { Ledger, slotDimension } from "./ledger";

/** The worked-on columns, columns × positions. */
export function ledgerX(l: Ledger): usize { return l.x; }
/** A Σ Aᵀ of the worked-on columns, both triangles, columns². */
export function ledgerGram(l: Ledger): usize { return l.gram; }
/** Flops of paths, comparisons and backward solves since the ledger began; small dense work is not counted. */
export function ledgerFlops(l: Ledger): f64 { return l.flops; }
/** Xᵀ X of the worked-on columns, both triangles, columns²: A Σ Aᵀ of base and leaves alone. */
export function ledgerOwnGram(l: Ledger): usize { return l.ownGram; }
export function ledgerAdded(l: Ledger): i32 { return l.added; }
export function ledgerRemoved(l: Ledger): i32 { return l.removed; }
/** Numbers in the columns of V. */
export function ledgerEntries(l: Ledger): f64 { return l.chunkEntries; }
/** Bytes beyond the base: columns of V, the small dense matrices, leaves. */
export function ledgerBytes(l: Ledger): f64 {
  const a = <f64>l.addedRoom, r = <f64>l.removedRoom;
  return l.chunkBytes + 16 * (a * a + a * r + r * r) + 8 * <f64>l.numberRoom;
}

/** Largest 1 + a Σ aᵀ over added rows from `since` on, each as it came after those before it: how many times stronger a row made what
 *  it reads. 1 when there is none. */
export function strongestRow(l: Ledger, since: i32): f64 {
  let most: f64 = 1;
  for (let q = since; q < l.added; ++q) {
    const d = f64At(l.kAdded, q * (l.addedRoom + 1));
    if (d * d > most) most = d * d;
  }
  return most;
}

// What the ledger's differences cost. With Σ₀ of base and leaves, Σ₁ with the added rows in as well, Σ with the removed ones out:

/** At least λmax of S₁ = I + V₁ᵀ V₁, so that Σ₀ ≤ growth × Σ₁: by what factor added rows have made anything smaller. 1 + tr V₁ᵀ V₁. */
export function addedGrowth(l: Ledger): f64 {
  let sum: f64 = 1;
  for (let q = 0; q < l.added; ++q) sum += f64At(l.sAdded, q * (l.addedRoom + 1)) - 1;
  return sum;
}

/** tr A₂ Σ₀ A₂ᵀ over the removed rows: the size of the terms from which their pivots are left over. */
export function removedReach(l: Ledger): f64 {
  let sum: f64 = 0;
  for (let q = 0; q < l.removed; ++q) sum += f64At(l.sRemoved, q * (l.removedRoom + 1)) + 1;
  return sum;
}

/** ‖T⁻¹‖² in the Frobenius norm of a lower triangle T of order r: at least 1 ÷ λmin of T Tᵀ. Infinite when memory runs out.  Cost: r³ ÷ 6. */
function inverseSquares(r: i32, t: usize, ld: i32): f64 {
  const x = allocateArray(<f64>r, 3);
  if (!x) return Infinity;
  let sum: f64 = 0;
  for (let j = 0; j < r; ++j) {
    memory.fill(x, 0, <usize>r << 3);
    setF64(x, j, 1);
    for (let k = j; k < r; ++k) {
      const column = atF64(t, k * ld), value = f64At(x, k) / f64At(column, k);
      sum += value * value;
      for (let i = k + 1; i < r; ++i) addF64(x, i, -value * f64At(column, i));
    }
  }
  release(x);
  return sum;
}

/** At least 1 ÷ λmin of K₂ K₂ᵀ = I − A₂ Σ₁ A₂ᵀ, so that Σ ≤ growth × Σ₁: by what factor the removed rows have made anything larger.
 *  1 without removed rows; infinite when memory runs out.  Cost: removed³ ÷ 6. */
export function removedGrowth(l: Ledger): f64 {
  return l.removed ? Math.max(1, inverseSquares(l.removed, l.kRemoved, l.removedRoom)) : 1;
}

/** The same of the removed rows of a batch that factorInnovation has factored, beside what counted before it. */
export function innovationGrowth(l: Ledger, plus: i32, minus: i32): f64 {
  const rows = plus + minus;
  return minus ? Math.max(1, inverseSquares(minus, atF64(l.schur, plus * (rows + 1)), rows)) : 1;
}

/** At least λmax of I + A Σ Aᵀ of the added rows from `since` on, Σ being that before them: by what factor they have made anything smaller.
 *  1 + the trace of the border's own part of K₁ K₁ᵀ less I.  Only while nothing is removed.  Cost: half the square of those rows. */
export function owedGrowth(l: Ledger, since: i32): f64 {
  let sum: f64 = 1;
  for (let j = since; j < l.added; ++j) {
    const column = atF64(l.kAdded, j * l.addedRoom);
    for (let i = j; i < l.added; ++i) sum += f64At(column, i) * f64At(column, i);
  }
  return sum - <f64>(l.added - since);
}

/** log det Λ of base, leaves and ledger together: 2 Σ log of the diagonals of L and of K.  Cost: a logarithm an unknown and a row. */
export function ledgerLogDeterminant(l: Ledger): f64 {
  let sum: f64 = 0;
  for (let slot = l.baseSlots; slot < l.slots; ++slot) {
    const d = slotDimension(l, slot), triangle = atF64(l.numbers, i32At(l.leafStart, slot));
    for (let j = 0; j < d; ++j) sum += Math.log(f64At(triangle, j * (d + 1)));
  }
  for (let q = 0; q < l.added; ++q) sum += Math.log(f64At(l.kAdded, q * (l.addedRoom + 1)));
  for (let q = 0; q < l.removed; ++q) sum += Math.log(f64At(l.kRemoved, q * (l.removedRoom + 1)));
  return logDeterminant(l.factor) + 2 * sum;
}
