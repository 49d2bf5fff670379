/** Extend-add: a child's update matrix added into its parent's front.
 *  The rows of one state follow one another in both, so whole runs are added with SIMD instead of entry by entry. */
import { i32At } from "../memory/access";
import { Symbolic } from "../symbolic/symbolic";

/** into[k] += from[k], k = 0 … count − 1. */
// @ts-ignore: decorator
@inline
function addRun(from: usize, into: usize, count: i32): void {
  let k = count;
  for (; k >= 2; k -= 2, from += 16, into += 16) v128.store(into, f64x2.add(v128.load(into), v128.load(from)));
  if (k) store<f64>(into, load<f64>(into) + load<f64>(from));
}

/** Adds the lower triangle of child c's update matrix (its rows below, leading dimension rounded up to even) to the parent's panel
 *  (`width` columns, leading dimension `lead`) and update matrix (the rows under them, leading dimension `leadUpdate`). */
export function addUpdate(
  s: Symbolic, c: i32, child: usize, width: i32, panel: usize, lead: i32, update: usize, leadUpdate: i32,
): void {
  const runs = s.runs + (<usize>i32At(s.runStart, c) << 3), end = s.runs + (<usize>i32At(s.runEnd, c) << 3);
  const stride = <usize>((i32At(s.rowStart, c + 1) - i32At(s.rowStart, c) + 1) & ~1) << 3;
  for (let run = runs, column = child; run < end; run += 8) {
    const position = load<i32>(run), length = load<i32>(run, 4);
    for (let j = 0; j < length; ++j, column += stride + 8) { // column starts at its diagonal entry
      const q = position + j;
      // Row 0 of the front in the parent's column q: the panel's top, or where it would be above the update matrix.
      const base = q < width
        ? panel + (<usize>(q * lead) << 3)
        : update + (<usize>((q - width) * leadUpdate) << 3) - (<usize>width << 3);
      let from = column;
      addRun(from, base + (<usize>q << 3), length - j);
      from += <usize>(length - j) << 3;
      for (let other = run + 8; other < end; other += 8) {
        const count = load<i32>(other, 4);
        addRun(from, base + (<usize>load<i32>(other) << 3), count);
        from += <usize>count << 3;
      }
    }
  }
}
