/** What belongs to unknowns and states, brought from the caller's numbering into elimination order. */
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { Symbolic } from "../symbolic/symbolic";

/** The states in elimination order, and their dimensions: i32[states] each. stateOf i32[n]: state of each unknown; sizes i32[states].
 *  Unknowns of one state follow one another in elimination order, since their blocks are whole. */
export function orderStates(s: Symbolic, stateOf: usize, sizes: usize, stateOfSlot: usize, dimensions: usize): void {
  for (let c = 0, slot = 0; c < s.n; ++slot) {
    const state = i32At(stateOf, i32At(s.order, c)), d = i32At(sizes, state);
    setI32(stateOfSlot, slot, state);
    setI32(dimensions, slot, d);
    c += d;
  }
}

/** y[c] := x of the unknown eliminated c-th, f64[n] each. */
export function orderVector(s: Symbolic, x: usize, y: usize): void {
  for (let c = 0; c < s.n; ++c) setF64(y, c, f64At(x, i32At(s.order, c)));
}

/** The diagonal f64[n] of a lower triangle by columns, the diagonal first in each. */
export function lowerDiagonal(n: i32, columnStart: usize, values: usize, diagonal: usize): void {
  for (let j = 0; j < n; ++j) setF64(diagonal, j, f64At(values, i32At(columnStart, j)));
}
