/** The small dense matrix of the ledger, S = C + Vᵀ V, and its signed Cholesky factor.
 *  Rows added (sign +1) come first, rows taken out (−1) after them:
 *      S = K J Kᵀ,   K = [ K₁  0 ; Mᵀ  K₂ ],   J = diag(+1 …, −1 …),   K₁ K₁ᵀ = I + V₁ᵀ V₁,   M = K₁⁻¹ V₁ᵀ V₂,
 *      K₂ K₂ᵀ = I − V₂ᵀ V₂ + Mᵀ M = I − A₂ Σ₁ A₂ᵀ   (Σ₁: covariance with all added rows in).
 *  Both blocks are positive definite exactly when the system that is left is, so no pivoting is needed, K₁ grows by a border as rows
 *  arrive, and a failing pivot of K₂ names the row whose withdrawal leaves something undetermined.
 *  Sources: Vanderbei, "Symmetric quasidefinite matrices", SIAM J. Optim. 5 (1995); bordering: Golub, Van Loan, section 4.2. */
import { atF64, f64At, setF64 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { factorPanel } from "../dense/factor-panel";
import { SUBTRACT } from "../dense/mode";
import { multiply } from "../dense/multiply";
import { multiplyTransposed } from "../dense/multiply-transposed";
import { solveLowerMany, solveLowerTransposedMany } from "../dense/solve-left";
import { solveRightTransposed } from "../dense/solve-right";
import { allocateArray, release } from "../memory/heap";
import { placeComparisons } from "./columns";
import { Ledger } from "./ledger";

/** A pivot of 1 − a Σ aᵀ at most this is rounding noise: what is left does not determine the states of that row. */
const PIVOT_FLOOR: f64 = 64 * f64.EPSILON;

/** A copy of a column-major matrix with a larger leading dimension and room for more columns. 0 when memory runs out. */
function widen(old: usize, rows: i32, columns: i32, ld: i32, newLd: i32, newColumns: i32): usize {
  const at = allocateArray(<f64>newLd * <f64>newColumns, 3);
  if (!at) return 0;
  memory.fill(at, 0, <usize>newLd * <usize>newColumns << 3); // rows that do not count yet weigh nothing
  for (let j = 0; j < columns; ++j) memory.copy(atF64(at, j * newLd), atF64(old, j * ld), <usize>rows << 3);
  return at;
}

function releaseAll(a: usize, b: usize, c: usize, d: usize, e: usize, f: usize, g: usize, h: usize, i: usize, j: usize): void {
  release(a); release(b); release(c); release(d); release(e); release(f); release(g); release(h); release(i); release(j);
}

/** Room for so many rows of each sign. OK, or OUT_OF_MEMORY with nothing changed but room. */
export function reserveRows(l: Ledger, added: i32, removed: i32): i32 {
  if (added <= l.addedRoom && removed <= l.removedRoom) return OK;
  const a = added <= l.addedRoom ? l.addedRoom : (added + (added >> 3) + 31) & ~7;
  const r = removed <= l.removedRoom ? l.removedRoom : (removed + (removed >> 3) + 31) & ~7;
  const sAdded = widen(l.sAdded, l.added, l.added, l.addedRoom, a, a), kAdded = widen(l.kAdded, l.added, l.added, l.addedRoom, a, a);
  const sCross = widen(l.sCross, l.added, l.removed, l.addedRoom, a, r), kCross = widen(l.kCross, l.added, l.removed, l.addedRoom, a, r);
  const sRemoved = widen(l.sRemoved, l.removed, l.removed, l.removedRoom, r, r);
  const kRemoved = widen(l.kRemoved, l.removed, l.removed, l.removedRoom, r, r);
  // g and h of one sign share a block.
  const g = widen(l.gAdded, l.added, 2, l.addedRoom, a, 2), gr = widen(l.gRemoved, l.removed, 2, l.removedRoom, r, 2);
  const columns = l.fColumns;
  // f and c, each with its own leading dimension, stand one behind the other: as many columns again.
  const f = widen(l.fAdded, l.added, 2 * columns, l.addedRoom, a, 2 * columns), fr = widen(l.fRemoved, l.removed, 2 * columns, l.removedRoom, r, 2 * columns);
  if (!sAdded || !kAdded || !sCross || !kCross || !sRemoved || !kRemoved || !g || !gr || !f || !fr) {
    releaseAll(sAdded, kAdded, sCross, kCross, sRemoved, kRemoved, g, gr, f, fr);
    return OUT_OF_MEMORY;
  }
  releaseAll(l.sAdded, l.kAdded, l.sCross, l.kCross, l.sRemoved, l.kRemoved, l.gAdded, l.gRemoved, l.fAdded, l.fRemoved);
  l.sAdded = sAdded;
  l.kAdded = kAdded;
  l.sCross = sCross;
  l.kCross = kCross;
  l.sRemoved = sRemoved;
  l.kRemoved = kRemoved;
  l.gAdded = g;
  l.hAdded = atF64(g, a);
  l.gRemoved = gr;
  l.hRemoved = atF64(gr, r);
  l.addedRoom = a;
  l.removedRoom = r;
  placeComparisons(l, f, fr, columns);
  return OK;
}

/** f := K⁻¹ f for `k` columns: f₁ (leading dimension addedRoom), f₂ (removedRoom). */
export function solveSigned(l: Ledger, f1: usize, f2: usize, k: i32): void {
  if (l.added) solveLowerMany(l.added, k, l.kAdded, l.addedRoom, f1, l.addedRoom);
  if (!l.removed) return;
  if (l.added) multiplyTransposed(l.removed, k, l.added, l.kCross, l.addedRoom, f1, l.addedRoom, f2, l.removedRoom, SUBTRACT);
  solveLowerMany(l.removed, k, l.kRemoved, l.removedRoom, f2, l.removedRoom);
}

/** f := K⁻ᵀ J f for `k` columns, so that together with solveSigned f becomes S⁻¹ c. */
export function weighSigned(l: Ledger, f1: usize, f2: usize, k: i32): void {
  if (l.removed) {
    for (let j = 0; j < k; ++j) for (let q = 0; q < l.removed; ++q) setF64(f2, j * l.removedRoom + q, -f64At(f2, j * l.removedRoom + q));
    solveLowerTransposedMany(l.removed, k, l.kRemoved, l.removedRoom, f2, l.removedRoom);
    if (l.added) multiply(l.added, k, l.removed, l.kCross, l.addedRoom, f2, 1, l.removedRoom, f1, l.addedRoom, SUBTRACT);
  }
  if (l.added) solveLowerTransposedMany(l.added, k, l.kAdded, l.addedRoom, f1, l.addedRoom);
}

/** Factors S[from …] anew: the border of the added rows from `from` on, then all of the removed part. floors f64[rows] is workspace.
 *  OK, or 1 + the removed row whose pivot failed; K is then not usable until factored again. */
export function factorSigned(l: Ledger, from: i32, floors: usize): i32 {
  const a = l.added, r = l.removed, ld = l.addedRoom, ldr = l.removedRoom;
  if (from < a) {
    // Bordering: rows from … a − 1 of K₁ left of column `from` solve (new rows) K₁,oldᵀ = S_new,old; then the new corner is factored.
    for (let j = 0; j < a; ++j) {
      const top = max(j, from);
      memory.copy(atF64(l.kAdded, j * ld + top), atF64(l.sAdded, j * ld + top), <usize>(a - top) << 3);
    }
    if (from) solveRightTransposed(a - from, from, l.kAdded, ld, atF64(l.kAdded, from), ld);
    for (let q = 0; q < a; ++q) setF64(floors, q, 0);
    const failed = factorPanel(a, a, l.kAdded, ld, floors, from, a);
    assert(failed == 0, "an added row has a pivot of at least 1");
    if (failed) return failed;
  }
  if (!r) return OK;
  for (let j = 0; j < r; ++j) {
    memory.copy(atF64(l.kCross, j * ld), atF64(l.sCross, j * ld), <usize>a << 3);
    for (let i = j; i < r; ++i) setF64(l.kRemoved, j * ldr + i, -f64At(l.sRemoved, j * ldr + i));
  }
  if (a) {
    solveLowerMany(a, r, l.kAdded, ld, l.kCross, ld);
    for (let j = 0; j < r; ++j) {
      for (let i = j; i < r; ++i) {
        let sum = f64At(l.kRemoved, j * ldr + i);
        for (let q = 0; q < a; ++q) sum += f64At(l.kCross, i * ld + q) * f64At(l.kCross, j * ld + q);
        setF64(l.kRemoved, j * ldr + i, sum);
      }
    }
  }
  for (let q = 0; q < r; ++q) setF64(floors, q, PIVOT_FLOOR);
  return factorPanel(r, r, l.kRemoved, ldr, floors, 0, r);
}
