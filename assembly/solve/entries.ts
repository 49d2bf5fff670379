/** Chosen entries of A⁻¹, anywhere, by forward solves over reaches alone: with y_j = L⁻¹ e_j, (A⁻¹)ᵢⱼ = yᵢᵀ yⱼ, and the product
 *  needs only the common ancestors of the two. A column with many wanted rows takes one backward solve over their ancestors instead.
 *  The reach: see reach.ts. The product: A⁻¹ = L⁻ᵀ L⁻¹ (Golub, Van Loan, "Matrix Computations", section 4.2). */
import { allocateArray, release } from "../memory/heap";
import { atF64, f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { dot } from "../dense/vector";
import { Factor } from "../factor/cholesky";
import { Symbolic } from "../symbolic/symbolic";
import { addPath, clearMarks } from "./reach";
import { backwardSolve, forwardSolve, gatherRoom } from "./triangular";

/** Wanted rows of one column from which a backward solve is cheaper than a forward solve each (a backward solve over their
 *  ancestors costs about as much as two forward solves of the same size). */
const MANY_ROWS = 3;

@unmanaged
class Workspace {
  /** f64[n] twice, zero between uses. */
  x: usize;
  y: usize;
  buffer: usize;
  /** i32[supernodes] each: two lists and their marks. */
  listX: usize;
  listY: usize;
  mark: usize;
}

/** out[k] = (A⁻¹)[rows[k], columns[k]], caller's numbering. rows, columns i32[count] with equal columns side by side; out f64[count].
 *  OK or OUT_OF_MEMORY.  Cost: two panel entries' flops for each entry of L on the paths walked. */
export function inverseEntries(f: Factor, rows: usize, columns: usize, count: i32, out: usize): i32 {
  const s = f.symbolic, address = allocateArray(1, 6);
  if (!address) return OUT_OF_MEMORY;
  const w = changetype<Workspace>(address);
  w.x = allocateArray(2 * <f64>s.n, 3);
  w.buffer = allocateArray(gatherRoom(s, 1), 3);
  w.listX = allocateArray(3 * <f64>s.supernodes, 2);
  const complete = w.x && w.buffer && w.listX;
  if (complete) {
    w.y = atF64(w.x, s.n);
    w.listY = w.listX + (<usize>s.supernodes << 2);
    w.mark = w.listY + (<usize>s.supernodes << 2);
    memory.fill(w.x, 0, <usize>s.n << 4);
    memory.fill(w.mark, 0, <usize>s.supernodes << 2);
    for (let k = 0; k < count;) {
      let end = k + 1;
      while (end < count && i32At(columns, end) == i32At(columns, k)) ++end;
      oneColumn(f, w, i32At(columns, k), rows, k, end, out);
      k = end;
    }
  }
  release(w.x);
  release(w.buffer);
  release(w.listX);
  release(address);
  return complete ? OK : OUT_OF_MEMORY;
}

/** Forward-solves the unit vector of column c (elimination order) into x over its path, listed; returns where the list begins. */
function unitReach(f: Factor, c: i32, x: usize, list: usize, w: Workspace): i32 {
  const s = f.symbolic, supernodes = s.supernodes;
  const from = addPath(s, i32At(s.supernodeOf, c), list, supernodes, w.mark);
  clearMarks(list, from, supernodes, w.mark);
  setF64(x, c, 1);
  forwardSolve(f, x, 1, list, from, supernodes, w.buffer);
  return from;
}

/** Zeroes x over the supernodes of list[from …]. */
function clearReach(s: Symbolic, x: usize, list: usize, from: i32): void {
  for (let k = from; k < s.supernodes; ++k) {
    const t = i32At(list, k), first = i32At(s.first, t);
    memory.fill(atF64(x, first), 0, <usize>(i32At(s.first, t + 1) - first) << 3);
  }
}

/** Σ over the common part of the two paths. Both end at the root they share; above the first common supernode all are common. */
function dotOverPath(s: Symbolic, x: usize, listX: usize, fromX: i32, y: usize, listY: usize, fromY: i32): f64 {
  let sum: f64 = 0;
  for (let k = s.supernodes - 1; k >= fromX && k >= fromY; --k) {
    const t = i32At(listX, k);
    if (i32At(listY, k) != t) break;
    const first = i32At(s.first, t);
    sum += dot(i32At(s.first, t + 1) - first, atF64(x, first), atF64(y, first));
  }
  return sum;
}

function oneColumn(f: Factor, w: Workspace, column: i32, rows: usize, from: i32, to: i32, out: usize): void {
  const s = f.symbolic, supernodes = s.supernodes, c = i32At(s.place, column);
  let fromX = unitReach(f, c, w.x, w.listX, w);
  if (to - from >= MANY_ROWS) {
    // Extend the list by the ancestors of all wanted rows, then go back down over it.
    for (let k = fromX; k < supernodes; ++k) setI32(w.mark, i32At(w.listX, k), 1);
    for (let k = from; k < to; ++k) fromX = addPath(s, i32At(s.supernodeOf, i32At(s.place, i32At(rows, k))), w.listX, fromX, w.mark);
    clearMarks(w.listX, fromX, supernodes, w.mark);
    backwardSolve(f, w.x, 1, w.listX, fromX, supernodes, w.buffer);
    for (let k = from; k < to; ++k) setF64(out, k, f64At(w.x, i32At(s.place, i32At(rows, k))));
  } else {
    for (let k = from; k < to; ++k) {
      const r = i32At(s.place, i32At(rows, k));
      if (r == c) { setF64(out, k, dotOverPath(s, w.x, w.listX, fromX, w.x, w.listX, fromX)); continue; }
      const fromY = unitReach(f, r, w.y, w.listY, w);
      setF64(out, k, dotOverPath(s, w.x, w.listX, fromX, w.y, w.listY, fromY));
      clearReach(s, w.y, w.listY, fromY);
    }
  }
  clearReach(s, w.x, w.listX, fromX);
}
