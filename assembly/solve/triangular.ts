/** Solves with L and Lᵀ over any set of supernodes that is closed toward the root: all of them, or the reach of a sparse right-hand
 *  side (forward), or the ancestors of the unknowns asked for (backward; what lies outside is then not touched).
 *  Right-hand sides lie side by side for each unknown: X is `columns` × n, column-major, leading dimension `columns`. Gathering and
 *  scattering then move whole pieces, and the panels run in the dense kernels; a single column uses those for vectors.
 *  Source: George, Liu, "Computer Solution of Large Sparse Positive Definite Systems" (1981), ch. 2; Ng, Peyton (1993). */
import { addF64, atF64, f64At, i32At, setF64, u32At } from "../memory/access";
import { multiply } from "../dense/multiply";
import { solveRight, solveRightTransposed } from "../dense/solve-right";
import { solveLower, solveLowerTransposed } from "../dense/solve-left";
import { subtractProduct, subtractTransposedProduct } from "../dense/vector";
import { NEGATE, SUBTRACT } from "../dense/mode";
import { Factor } from "../factor/cholesky";

/** The supernode k-th in the list, or k itself when there is no list. */
// @ts-ignore: decorator
@inline function listed(list: usize, k: i32): i32 { return list ? i32At(list, k) : k; }

/** X := L⁻¹ X over the supernodes list[from … to − 1] (list 0: from … to − 1 themselves), children before parents.
 *  buffer f64[columns × deepest].  Cost: 2 × columns × entries of the panels walked. */
export function forwardSolve(f: Factor, x: usize, columns: i32, list: usize, from: i32, to: i32, buffer: usize): void {
  const s = f.symbolic;
  for (let k = from; k < to; ++k) {
    const t = listed(list, k), first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
    const rows = s.rows + (<usize>i32At(s.rowStart, t) << 2), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t), under = atF64(panel, width);
    if (columns == 1) {
      const own = atF64(x, first);
      solveLower(width, panel, lead, own);
      memory.fill(buffer, 0, <usize>below << 3);
      subtractProduct(below, width, under, lead, own, buffer);
      for (let i = 0; i < below; ++i) addF64(x, i32At(rows, i), f64At(buffer, i));
    } else {
      const own = atF64(x, first * columns);
      solveRightTransposed(columns, width, panel, lead, own, columns);
      multiply(columns, below, width, own, columns, under, lead, 1, buffer, columns, NEGATE);
      for (let i = 0; i < below; ++i) addPiece(atF64(buffer, i * columns), atF64(x, i32At(rows, i) * columns), columns);
    }
  }
}

/** X := L⁻ᵀ X over the supernodes list[to − 1] down to list[from]. buffer f64[columns × deepest]. */
export function backwardSolve(f: Factor, x: usize, columns: i32, list: usize, from: i32, to: i32, buffer: usize): void {
  const s = f.symbolic;
  for (let k = to - 1; k >= from; --k) {
    const t = listed(list, k), first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
    const rows = s.rows + (<usize>i32At(s.rowStart, t) << 2), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t), under = atF64(panel, width);
    if (columns == 1) {
      const own = atF64(x, first);
      for (let i = 0; i < below; ++i) setF64(buffer, i, f64At(x, i32At(rows, i)));
      subtractTransposedProduct(below, width, under, lead, buffer, own);
      solveLowerTransposed(width, panel, lead, own);
    } else {
      const own = atF64(x, first * columns);
      for (let i = 0; i < below; ++i) copyPiece(atF64(x, i32At(rows, i) * columns), atF64(buffer, i * columns), columns);
      multiply(columns, width, below, buffer, columns, under, 1, lead, own, columns, SUBTRACT);
      solveRight(columns, width, panel, lead, own, columns);
    }
  }
}

// @ts-ignore: decorator
@inline
function addPiece(from: usize, into: usize, count: i32): void {
  let k = count;
  for (; k >= 2; k -= 2, from += 16, into += 16) v128.store(into, f64x2.add(v128.load(into), v128.load(from)));
  if (k) store<f64>(into, load<f64>(into) + load<f64>(from));
}

// @ts-ignore: decorator
@inline
function copyPiece(from: usize, into: usize, count: i32): void {
  let k = count;
  for (; k >= 2; k -= 2, from += 16, into += 16) v128.store(into, v128.load(from));
  if (k) store<f64>(into, load<f64>(from));
}
