/** The rows of every supernode, and where they stand in the parent's front.
 *  Row i of L is the union of the tree paths from its entries in A up to i; walking them for ascending i lists each supernode's
 *  rows ascending, without a sort and without a set union.
 *  Sources: Liu, "A compact row storage scheme for Cholesky factors using elimination trees", ACM TOMS 12 (1986);
 *  relative indices: Schreiber, "A new implementation of sparse Gaussian elimination", ACM TOMS 8 (1982). */
import { i32At, setI32 } from "../memory/access";
import { Halves } from "./halves";
import { Symbolic } from "./symbolic";

/** Appends the rows of block columns [from, to) to the supernodes above which they stand.
 *  step i32[blocks]: elimination step of each block column, label its inverse; blockSupernode i32[blocks]; firstUnknown
 *  i32[blocks + 1]: first column (unknown) of each block column. `fill` i32[supernodes]: next free place in rows, starting at
 *  rowStart; `mark` i32[supernodes]: −1 on the first call. Both carry over between calls with ascending ranges. */
export function appendRows(
  s: Symbolic, halves: Halves, step: usize, label: usize, blockSupernode: usize, firstUnknown: usize, fill: usize, mark: usize, from: i32, to: i32,
): void {
  const parent = s.parent, rows = s.rows, earlierStart = halves.earlierStart, earlier = halves.earlier;
  for (let i = from; i < to; ++i) {
    const own = i32At(blockSupernode, i), first = i32At(firstUnknown, i), end = i32At(firstUnknown, i + 1);
    const k = i32At(step, i);
    for (let p = i32At(earlierStart, k), last = i32At(earlierStart, k + 1); p < last; ++p) {
      for (let t = i32At(blockSupernode, i32At(label, i32At(earlier, p))); t != own && i32At(mark, t) != i; t = i32At(parent, t)) {
        setI32(mark, t, i);
        let at = i32At(fill, t);
        for (let r = first; r < end; ++r) setI32(rows, at++, r);
        setI32(fill, t, at);
      }
    }
  }
}

/** Writes the runs of the children of supernode p to `out` from pair `at` on, and sets runStart and runEnd of each. `local`
 *  i32[n] is workspace without requirement. Returns the next free pair. Cost: rows of p and of its children. */
export function childRuns(s: Symbolic, p: i32, local: usize, out: usize, at: i32): i32 {
  const first = i32At(s.first, p), width = i32At(s.first, p + 1) - first, rows = s.rows;
  for (let q = i32At(s.rowStart, p), end = i32At(s.rowStart, p + 1), k = width - q; q < end; ++q) setI32(local, i32At(rows, q), q + k);
  for (let e = i32At(s.childStart, p), last = i32At(s.childStart, p + 1); e < last; ++e) {
    const c = i32At(s.children, e);
    setI32(s.runStart, c, at);
    let expected = -1, length = 0;
    for (let q = i32At(s.rowStart, c), end = i32At(s.rowStart, c + 1); q < end; ++q) {
      const r = i32At(rows, q);
      const position = r < first + width ? r - first : i32At(local, r);
      if (position != expected) {
        if (length) setI32(out, 2 * at - 1, length);
        setI32(out, 2 * at, position);
        ++at;
        length = 0;
      }
      ++length;
      expected = position + 1;
    }
    if (length) setI32(out, 2 * at - 1, length);
    setI32(s.runEnd, c, at);
  }
  return at;
}

/** Offsets of the update matrices and of the fronts in their stacks, and how large those grow.
 *  Two stacks each, by the parity of the depth in the tree. Going up, the updates of a supernode's children are the topmost of one
 *  stack while its own is pushed on the other; going down, a front is dropped once its last child has copied from it. So nothing is
 *  ever moved, and a tree that is one long path holds two fronts, not all. `depth` i32[supernodes] is workspace. */
export function planStacks(s: Symbolic, depth: usize): void {
  const count = s.supernodes;
  for (let t = count - 1; t >= 0; --t) {
    const p = i32At(s.parent, t);
    setI32(depth, t, p < 0 ? 0 : 1 - i32At(depth, p)); // parity is all that counts
  }
  for (let odd = 0; odd < 2; ++odd) {
    const base = odd ? s.updateEntries : 0;
    let top = base, most = base;
    for (let t = 0; t < count; ++t) { // parents free what their children left just before they push on the other stack
      if (i32At(depth, t) == odd) {
        const m = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
        store<u32>(s.update + (<usize>t << 2), <u32>top);
        top += <f64>m * <f64>((m + 1) & ~1);
        if (top > most) most = top;
      } else {
        const c = i32At(s.childStart, t);
        if (c < i32At(s.childStart, t + 1)) top = <f64>load<u32>(s.update + (<usize>i32At(s.children, c) << 2));
      }
    }
    s.updateEntries = most;
  }
  for (let odd = 0; odd < 2; ++odd) {
    const base = odd ? s.frontEntries : 0;
    let top = base, most = base;
    for (let t = count - 1; t >= 0; --t) {
      if (i32At(depth, t) == odd) {
        const m = i32At(s.first, t + 1) - i32At(s.first, t) + i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
        store<u32>(s.front + (<usize>t << 2), <u32>top);
        // Without children nothing reads it again: the next one of this parity takes its place.
        const size = <f64>m * <f64>((m + 1) & ~1);
        if (top + size > most) most = top + size;
        if (i32At(s.childStart, t) < i32At(s.childStart, t + 1)) top += size;
      } else {
        const p = i32At(s.parent, t);
        if (p >= 0 && i32At(s.children, i32At(s.childStart, p)) == t) top = <f64>load<u32>(s.front + (<usize>p << 2));
      }
    }
    s.frontEntries = most;
  }
}

/** Flops of a panel of `width` columns with `below` rows under its square: Σ over its columns of (entries)². */
export function panelFlops(width: i32, below: i32): f64 {
  const w = <f64>width, m = <f64>below;
  return w * (m * m + m * (w + 1) + (w + 1) * (2 * w + 1) / 6);
}

/** Sums over supernodes: panelFlops, panelEntries with offsets, extremes. False when a panel offset would pass 32 bits. */
export function layPanels(s: Symbolic): bool {
  let entries: f64 = 0;
  for (let t = 0; t < s.supernodes; ++t) {
    const width = i32At(s.first, t + 1) - i32At(s.first, t), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const lead = (width + below + 1) & ~1;
    setI32(s.lead, t, lead);
    store<u32>(s.panel + (<usize>t << 2), <u32>entries);
    entries += <f64>width * <f64>lead;
    if (entries > 536870000) return false; // 4 GiB of panels
    s.panelFlops += panelFlops(width, below);
    if (width > s.widest) s.widest = width;
    const under = <f64>width * <f64>((below + 1) & ~1);
    if (under > s.largestBelow) s.largestBelow = under;
    if (width + below > s.tallest) s.tallest = width + below;
  }
  store<u32>(s.panel + (<usize>s.supernodes << 2), <u32>entries);
  s.panelEntries = entries;
  return true;
}
