/** Addresses and sizes that a caller of the ledger reads. Addresses hold until the next call that makes room. */
import { atF64, f64At, i32At } from "../memory/access";
import { logDeterminant } from "../factor/cholesky";
import { Ledger, slotDimension } from "./ledger";

/** The worked-on columns, columns × positions. */
export function ledgerX(l: Ledger): usize { return l.x; }
/** A Σ Aᵀ of the worked-on columns, both triangles, columns². */
export function ledgerGram(l: Ledger): usize { return l.gram; }
/** Flops of paths, comparisons and backward solves since the ledger began; small dense work is not counted. */
export function ledgerFlops(l: Ledger): f64 { return l.flops; }
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

/** By what factor rounding errors of base and leaves have grown in what the ledger makes of them, 1 at least: differences of large numbers.
 *  An added row a makes what it reads 1 + a Σ₀ aᵀ times smaller (Σ₀: base and leaves alone), which is its diagonal entry of S; for a removed
 *  row the pivot 1 − a Σ₁ aᵀ is what terms as large as a Σ₀ aᵀ have left. */
export function ledgerLoss(l: Ledger): f64 {
  let most: f64 = 1;
  for (let q = 0; q < l.added; ++q) most = max(most, f64At(l.sAdded, q * (l.addedRoom + 1)));
  for (let q = 0; q < l.removed; ++q) {
    const d = f64At(l.kRemoved, q * (l.removedRoom + 1));
    most = max(most, max<f64>(1, 1 + f64At(l.sRemoved, q * (l.removedRoom + 1))) / (d * d));
  }
  return most;
}

/** Least pivot among the removed rows of a batch that factorInnovation has factored, 1 at most: the share of what held a state that is left. */
export function weakestInnovation(l: Ledger, plus: i32, minus: i32): f64 {
  let least: f64 = 1;
  for (let q = plus, rows = plus + minus; q < rows; ++q) {
    const d = f64At(l.schur, q * (rows + 1));
    least = min(least, d * d);
  }
  return least;
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
