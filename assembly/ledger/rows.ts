/** Rows entering and leaving the ledger: the border of S and of its factor, and the residual of each row. */
import { atF64, f64At, setF64 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { baseValues, forgetColumn, keepColumns, reserveBuffer, reserveChunks, trimColumns } from "./columns";
import { Ledger } from "./ledger";
import { factorSigned, reserveRows, solveSigned } from "./signed";

/** Brings the worked-on columns [0, plus + minus) into the ledger as rows that do not count yet: the first `plus` with sign +1, the
 *  others with sign −1 (taken out). Right after carryForward; columns of Σ as it was can still be carried back. Then settleRows or
 *  withdrawEntered.  residual f64[plus + minus]: measured minus predicted of each row at the linearization point.
 *  OK, or OUT_OF_MEMORY with nothing changed. */
export function enterRows(l: Ledger, plus: i32, minus: i32, residual: usize): i32 {
  const a = l.added, r = l.removed, k = l.columns;
  if (reserveRows(l, a + plus, r + minus) != OK || reserveBuffer(l, k) != OK || reserveChunks(l, plus + minus) != OK) return OUT_OF_MEMORY;
  const ld = l.addedRoom, ldr = l.removedRoom;
  for (let q = 0; q < plus; ++q) {
    for (let i = 0; i < a; ++i) setF64(l.sAdded, i * ld + a + q, f64At(l.cAdded, q * ld + i));
    for (let i = q; i < plus; ++i) setF64(l.sAdded, (a + q) * ld + a + i, f64At(l.ownGram, q * k + i) + (i == q ? 1 : 0));
    for (let i = 0; i < r; ++i) setF64(l.sCross, i * ld + a + q, f64At(l.cRemoved, q * ldr + i));
  }
  for (let q = 0; q < minus; ++q) {
    const column = plus + q;
    for (let i = 0; i < a; ++i) setF64(l.sCross, (r + q) * ld + i, f64At(l.cAdded, column * ld + i));
    for (let i = 0; i < plus; ++i) setF64(l.sCross, (r + q) * ld + a + i, f64At(l.ownGram, column * k + i));
    for (let i = 0; i < r; ++i) setF64(l.sRemoved, i * ldr + r + q, f64At(l.cRemoved, column * ldr + i));
    for (let i = q; i < minus; ++i) setF64(l.sRemoved, (r + q) * ldr + r + i, f64At(l.ownGram, column * k + plus + i) - (i == q ? 1 : 0));
  }
  baseValues(l, l.buffer);
  for (let q = 0; q < plus; ++q) setF64(l.gAdded, a + q, f64At(residual, q) - f64At(l.buffer, q));
  for (let q = 0; q < minus; ++q) setF64(l.gRemoved, r + q, f64At(residual, plus + q) - f64At(l.buffer, plus + q));
  keepColumns(l, 0, plus, a);
  keepColumns(l, plus, minus, ~r);
  return OK;
}

/** Makes the entered rows count.  OK, or 1 + the removed row (counting all in the ledger) whose withdrawal leaves a state undetermined;
 *  the rows have then left again.  Cost: the border of the factor, and its removed part anew. */
export function settleRows(l: Ledger, plus: i32, minus: i32): i32 {
  const a = l.added, r = l.removed;
  l.added = a + plus;
  l.removed = r + minus;
  const failed = factorSigned(l, a, l.buffer);
  if (failed) {
    l.added = a;
    l.removed = r;
    factorSigned(l, a, l.buffer); // the removed part as it was
    withdrawEntered(l);
    return failed;
  }
  carryResiduals(l);
  return OK;
}

/** Takes rows that were entered and not settled out again. */
export function withdrawEntered(l: Ledger): void { trimColumns(l, l.added, ~l.removed); }

/** Takes added row `id` out again, as if it had never come. Only while nothing is removed (then the result is surely definite).
 *  Later rows move up by one.  Cost: a look at every chunk, and the factor of S from that row on. */
export function dropRow(l: Ledger, id: i32): void {
  assert(l.removed == 0 && id < l.added);
  const a = l.added, ld = l.addedRoom;
  forgetColumn(l, id);
  for (let j = 0; j < id; ++j) memory.copy(atF64(l.sAdded, j * ld + id), atF64(l.sAdded, j * ld + id + 1), <usize>(a - 1 - id) << 3);
  for (let j = id + 1; j < a; ++j) memory.copy(atF64(l.sAdded, (j - 1) * ld + j - 1), atF64(l.sAdded, j * ld + j), <usize>(a - j) << 3);
  memory.copy(atF64(l.gAdded, id), atF64(l.gAdded, id + 1), <usize>(a - 1 - id) << 3);
  l.added = a - 1;
  factorSigned(l, id, l.buffer);
  carryResiduals(l);
}

/** h := K⁻¹ g. */
function carryResiduals(l: Ledger): void {
  memory.copy(l.hAdded, l.gAdded, <usize>l.added << 3);
  memory.copy(l.hRemoved, l.gRemoved, <usize>l.removed << 3);
  solveSigned(l, l.hAdded, l.hRemoved, 1);
}
