/** The supernodes that a sparse right-hand side touches: the paths from its unknowns to the roots of the supernodal tree.
 *  Source: Gilbert, Peierls, "Sparse partial pivoting in time proportional to arithmetic operations", SIAM J. Sci. Stat. Comput. 9
 *  (1988); for a Cholesky factor the reach is a union of tree paths (Gilbert 1994, "Predicting structure in sparse matrix
 *  computations"). */
import { i32At, setI32 } from "../memory/access";
import { Symbolic } from "../symbolic/symbolic";

/** Adds the path from supernode t upward to a list that fills i32 `list` from its end: entries list[from] … hold it, children before
 *  parents. Marked supernodes (mark i32[supernodes], nonzero) are in the list already; new ones get marked. Returns the new `from`.
 *  A new piece of path goes before all others: its own ancestors are in the list, and nothing in the list lies below it. */
export function addPath(s: Symbolic, t: i32, list: usize, from: i32, mark: usize): i32 {
  let length = 0;
  for (let u = t; u >= 0 && !i32At(mark, u); u = i32At(s.parent, u)) { setI32(mark, u, 1); ++length; }
  from -= length;
  for (let k = 0, u = t; k < length; ++k, u = i32At(s.parent, u)) setI32(list, from + k, u);
  return from;
}

/** Clears the marks of list[from … end − 1]. */
export function clearMarks(list: usize, from: i32, end: i32, mark: usize): void {
  for (let k = from; k < end; ++k) setI32(mark, i32At(list, k), 0);
}
