/** Addresses and sizes that a caller of the ledger reads. Addresses hold until the next call that makes room. */
import { Ledger } from "./ledger";

/** y f64[positions]: base and leaves' right-hand side in their coordinates. The base's part is set by the caller (forward-solved). */
export function ledgerY(l: Ledger): usize { return l.y; }
/** The worked-on columns, columns × positions. */
export function ledgerX(l: Ledger): usize { return l.x; }
/** A Σ Aᵀ of the worked-on columns, both triangles, columns². */
export function ledgerGram(l: Ledger): usize { return l.gram; }
/** Signed factor of C + A Σ Aᵀ, lower triangle. */
export function ledgerSchur(l: Ledger): usize { return l.schur; }
export function ledgerAdded(l: Ledger): i32 { return l.added; }
export function ledgerRemoved(l: Ledger): i32 { return l.removed; }
/** Bytes beyond the base: columns of V, the small dense matrices, leaves. */
export function ledgerBytes(l: Ledger): f64 {
  const a = <f64>l.addedRoom, r = <f64>l.removedRoom;
  return l.chunkBytes + 16 * (a * a + a * r + r * r) + 8 * <f64>l.numberRoom;
}
