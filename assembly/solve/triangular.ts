/** Solves with L and Lᵀ over any set of supernodes that is closed toward the root: all of them, or the reach of a sparse right-hand
 *  side (forward), or the ancestors of the unknowns asked for (backward; what lies outside is then not touched).
 *  Right-hand sides lie side by side for each unknown, X[side × n], side = stride(columns): gathering and scattering move whole pieces.
 *  A single one runs along the panels' rows instead.
 *  Source: George, Liu, "Computer Solution of Large Sparse Positive Definite Systems" (1981), ch. 2; Ng, Peyton (1993). */
import { addF64, atF64, f64At, i32At, setF64, u32At } from "../memory/access";
import { solveLower, solveLowerTransposed } from "../dense/solve-left";
import { subtractProduct, subtractTransposedProduct } from "../dense/vector";
import { Factor } from "../factor/cholesky";
import { Symbolic } from "../symbolic/symbolic";
import { backwardPanel, forwardPanel } from "./strips";

/** Numbers of one unknown in X: as many as columns, rounded up to whole pairs when there are several. The odd one out must be finite. */
// @ts-ignore: decorator
@inline export function stride(columns: i32): i32 { return columns == 1 ? 1 : (columns + 1) & ~1; }

/** f64 that the solves need to gather `columns` right-hand sides at the rows of a panel. */
export function gatherRoom(s: Symbolic, columns: i32): f64 { return <f64>stride(columns) * <f64>s.tallest; }

/** The supernode k-th in the list, or k itself when there is no list. */
// @ts-ignore: decorator
@inline function listed(list: usize, k: i32): i32 { return list ? i32At(list, k) : k; }

/** X := L⁻¹ X over the supernodes list[from … to − 1] (list 0: from … to − 1 themselves), children before parents.
 *  buffer f64[gatherRoom].  Cost: 2 × columns × entries of the panels walked. */
export function forwardSolve(f: Factor, x: usize, columns: i32, list: usize, from: i32, to: i32, buffer: usize): void {
  const s = f.symbolic, pairs = stride(columns) >> 1, side = <usize>stride(columns) << 3;
  for (let k = from; k < to; ++k) {
    const t = listed(list, k), first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
    const rows = s.rows + (<usize>i32At(s.rowStart, t) << 2), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t), own = x + <usize>first * side;
    if (columns == 1) {
      solveLower(width, panel, lead, own);
      memory.fill(buffer, 0, <usize>below << 3);
      subtractProduct(below, width, atF64(panel, width), lead, own, buffer);
      for (let i = 0; i < below; ++i) addF64(x, i32At(rows, i), f64At(buffer, i));
    } else {
      const under = buffer + <usize>width * side;
      copyPairs(own, buffer, width * pairs);
      memory.fill(under, 0, <usize>below * side);
      forwardPanel(pairs, width, width + below, panel, <usize>lead << 3, buffer, side);
      copyPairs(buffer, own, width * pairs);
      for (let i = 0, from = under; i < below; ++i, from += side) addPairs(from, x + <usize>i32At(rows, i) * side, pairs);
    }
  }
}

/** X := L⁻ᵀ X over the supernodes list[to − 1] down to list[from]. buffer f64[gatherRoom]. */
export function backwardSolve(f: Factor, x: usize, columns: i32, list: usize, from: i32, to: i32, buffer: usize): void {
  const s = f.symbolic, pairs = stride(columns) >> 1, side = <usize>stride(columns) << 3;
  for (let k = to - 1; k >= from; --k) {
    const t = listed(list, k), first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
    const rows = s.rows + (<usize>i32At(s.rowStart, t) << 2), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t), own = x + <usize>first * side;
    if (columns == 1) {
      for (let i = 0; i < below; ++i) setF64(buffer, i, f64At(x, i32At(rows, i)));
      subtractTransposedProduct(below, width, atF64(panel, width), lead, buffer, own);
      solveLowerTransposed(width, panel, lead, own);
    } else {
      copyPairs(own, buffer, width * pairs);
      for (let i = 0, to = buffer + <usize>width * side; i < below; ++i, to += side) copyPairs(x + <usize>i32At(rows, i) * side, to, pairs);
      backwardPanel(pairs, width, width + below, panel, <usize>lead << 3, buffer, side);
      copyPairs(buffer, own, width * pairs);
    }
  }
}

// @ts-ignore: decorator
@inline
function addPairs(from: usize, into: usize, count: i32): void {
  for (; count > 0; --count, from += 16, into += 16) v128.store(into, f64x2.add(v128.load(into), v128.load(from)));
}

// @ts-ignore: decorator
@inline
function copyPairs(from: usize, into: usize, count: i32): void {
  for (; count > 0; --count, from += 16, into += 16) v128.store(into, v128.load(from));
}
