/** Supernodes: runs of states whose columns of L share one structure, so that they are stored and factored as one dense panel.
 *  First the fundamental ones, straight from tree and counts; then small ones are merged into their parents as long as the zeros
 *  that this stores stay a small share of the merged panel ("relaxed"). A merged child's rows always lie within its parent's
 *  columns and rows, so merging never changes a structure above.
 *  Sources: Liu, Ng, Peyton, "On finding supernodes for sparse matrix computations", SIAM J. Matrix Anal. Appl. 14 (1993);
 *  Ashcraft, Grimes, "The influence of relaxed supernode partitions on the multifrontal method", ACM TOMS 15 (1989);
 *  order of siblings: Liu, "On the storage requirement in the out-of-core multifrontal method", ACM TOMS 12 (1986). */
import { allocateArray, release } from "../memory/heap";
import { addI32, f64At, i32At, setF64, setI32 } from "../memory/access";

@unmanaged
export class Partition {
  /** Number of supernodes. */
  count: i32;
  /** i32[n]: final block column of each elimination step; a postorder of the same tree, so L has the same entries. */
  label: usize;
  /** i32[count + 1]: first block column of each supernode. */
  firstBlock: usize;
  /** i32[count]: parent supernode, −1 for a root. Children come before parents, subtrees are contiguous. */
  parent: usize;
  /** i32[count]: unknowns across. */
  width: usize;
  /** i32[count]: rows below the diagonal square. */
  below: usize;
}

/** The largest share of stored zeros that a merge may leave, by the merged width. Measured with a prototype on nets, patrols and helices: within
 *  10 % of the best of five settings on each. */
function allowedZeros(width: i32): f64 {
  if (width <= 4) return 0.6;
  if (width <= 8) return 0.4;
  if (width <= 16) return 0.2;
  if (width <= 48) return 0.1;
  return 0.05;
}

/** Finds the partition, or null when memory runs out.
 *  n steps with parent, post, count (unknowns in the column, own included) and weight (unknowns of the step), all i32[n]. */
export function findSupernodes(n: i32, parent: usize, post: usize, count: usize, weight: usize): Partition | null {
  const address = allocateArray(1, 5);
  const i32s = allocateArray(10 * <f64>n + 2, 2), f64s = allocateArray(2 * <f64>n, 3);
  const label = allocateArray(<f64>n, 2);
  if (!address || !i32s || !f64s || !label) { release(address); release(i32s); release(f64s); release(label); return null; }
  const bytes = <usize>n << 2;
  const home = i32s; // step → fundamental supernode
  const begin = home + bytes; // fundamental supernode → its first position in post (one more at the end)
  const width = begin + bytes + 4, below = width + bytes, up = below + bytes, head = up + bytes, next = head + bytes;
  const memberNext = next + bytes, memberHead = memberNext + bytes, memberTail = memberHead + bytes;
  const zeros = f64s, peak = f64s + (<usize>n << 3);

  const fundamental = fundamentalSupernodes(n, parent, post, count, weight, home, begin, width, below, head);
  for (let f = 0; f < fundamental; ++f) {
    const p = i32At(parent, i32At(post, i32At(begin, f + 1) - 1));
    setI32(up, f, p < 0 ? -1 : i32At(home, p));
    setI32(head, f, -1);
    setI32(memberHead, f, f);
    setI32(memberTail, f, f);
    setI32(memberNext, f, -1);
    setF64(zeros, f, 0);
  }
  let roots = -1, merged = 0;
  for (let f = 0; f < fundamental; ++f) { // children come first, so f's list of children is complete and settled here
    merged += absorbChildren(f, width, below, head, next, zeros, memberHead, memberTail, memberNext);
    largestChildFirst(f, below, head, next, peak);
    const p = i32At(up, f);
    if (p < 0) { setI32(next, f, roots); roots = f; } else { setI32(next, f, i32At(head, p)); setI32(head, p, f); }
  }

  const total = fundamental - merged;
  const tables = allocateArray(4 * <f64>total + 1, 2);
  if (!tables) { release(address); release(i32s); release(f64s); release(label); return null; }
  const result = changetype<Partition>(address);
  const size = <usize>total << 2;
  result.count = total;
  result.label = label;
  result.firstBlock = tables;
  result.parent = tables + size + 4;
  result.width = result.parent + size;
  result.below = result.width + size;
  numberPostorder(roots, post, begin, width, below, head, next, memberHead, memberNext, up, result);
  release(i32s);
  release(f64s);
  return result;
}

export function releasePartition(partition: Partition): void {
  release(partition.label);
  release(partition.firstBlock);
  release(changetype<usize>(partition));
}

/** Cuts the postorder into fundamental supernodes: a step joins its only child when its column is the child's less the child. */
function fundamentalSupernodes(
  n: i32, parent: usize, post: usize, count: usize, weight: usize, home: usize, begin: usize, width: usize, below: usize, children: usize,
): i32 {
  for (let j = 0; j < n; ++j) setI32(children, j, 0);
  for (let j = 0; j < n; ++j) { const p = i32At(parent, j); if (p >= 0) addI32(children, p, 1); }
  let f = -1, previous = -1;
  for (let t = 0; t < n; ++t) {
    const j = i32At(post, t), w = i32At(weight, j);
    const joins = previous >= 0 && i32At(parent, previous) == j && i32At(children, j) == 1
      && i32At(count, previous) == i32At(count, j) + i32At(weight, previous);
    if (!joins) { ++f; setI32(begin, f, t); setI32(width, f, 0); }
    setI32(home, j, f);
    addI32(width, f, w);
    setI32(below, f, i32At(count, j) - w);
    previous = j;
  }
  setI32(begin, f + 1, n);
  return f + 1;
}

/** Merges children into p, the one that adds the fewest zeros first, until one would pass the allowed share. Returns how many. */
function absorbChildren(
  p: i32, width: usize, below: usize, head: usize, next: usize, zeros: usize, memberHead: usize, memberTail: usize, memberNext: usize,
): i32 {
  let merges = 0;
  const m = i32At(below, p);
  while (true) {
    const height = i32At(width, p) + m;
    let best = -1, beforeBest = -1, fewest = Infinity;
    for (let c = i32At(head, p), before = -1; c >= 0; before = c, c = i32At(next, c)) {
      const added = <f64>i32At(width, c) * <f64>(height - i32At(below, c)) + f64At(zeros, c);
      if (added < fewest) { fewest = added; best = c; beforeBest = before; }
    }
    if (best < 0) return merges;
    const w = i32At(width, p) + i32At(width, best);
    const all = <f64>w * (0.5 * <f64>(w + 1) + <f64>m), stored = f64At(zeros, p) + fewest;
    if (stored > allowedZeros(w) * all) return merges;
    if (beforeBest < 0) setI32(head, p, i32At(next, best)); else setI32(next, beforeBest, i32At(next, best));
    for (let c = i32At(head, best); c >= 0;) { // its children are p's now
      const after = i32At(next, c);
      setI32(next, c, i32At(head, p));
      setI32(head, p, c);
      c = after;
    }
    setI32(memberNext, i32At(memberTail, best), i32At(memberHead, p));
    setI32(memberHead, p, i32At(memberHead, best));
    setI32(width, p, w);
    setF64(zeros, p, stored);
    ++merges;
  }
}

/** Puts first the child whose subtree needs the most stack above what it leaves, and notes p's own need. */
function largestChildFirst(p: i32, below: usize, head: usize, next: usize, peak: usize): void {
  const m = <f64>i32At(below, p);
  let left: f64 = 0, most = -1.0, first = -1, beforeFirst = -1;
  for (let c = i32At(head, p), before = -1; c >= 0; before = c, c = i32At(next, c)) {
    const u = <f64>i32At(below, c) * <f64>i32At(below, c);
    left += u;
    if (f64At(peak, c) - u > most) { most = f64At(peak, c) - u; first = c; beforeFirst = before; }
  }
  if (beforeFirst >= 0) {
    setI32(next, beforeFirst, i32At(next, first));
    setI32(next, first, i32At(head, p));
    setI32(head, p, first);
  }
  let need = left + m * m, held: f64 = 0;
  for (let c = i32At(head, p); c >= 0; c = i32At(next, c)) {
    if (held + f64At(peak, c) > need) need = held + f64At(peak, c);
    held += <f64>i32At(below, c) * <f64>i32At(below, c);
  }
  setF64(peak, p, need);
}

/** Numbers supernodes and block columns in postorder. `up` is reused for the supernode numbers. */
function numberPostorder(
  roots: i32, post: usize, begin: usize, width: usize, below: usize, head: usize, next: usize, memberHead: usize, memberNext: usize,
  number: usize, result: Partition,
): void {
  let s = 0, block = 0;
  for (let root = roots; root >= 0; root = i32At(next, root)) {
    let f = root;
    for (;;) {
      const child = i32At(head, f);
      if (child >= 0) {
        setI32(head, f, i32At(next, child));
        setI32(number, child, f); // the way back, until f gets its number
        f = child;
        continue;
      }
      const back = f == root ? -1 : i32At(number, f);
      setI32(result.firstBlock, s, block);
      setI32(result.width, s, i32At(width, f));
      setI32(result.below, s, i32At(below, f));
      for (let member = i32At(memberHead, f); member >= 0; member = i32At(memberNext, member)) {
        for (let t = i32At(begin, member), end = i32At(begin, member + 1); t < end; ++t) setI32(result.label, i32At(post, t), block++);
      }
      setI32(result.parent, s, back);
      setI32(number, f, s++);
      if (f == root) break;
      f = back;
    }
  }
  setI32(result.firstBlock, s, block);
  for (let k = 0; k < s; ++k) { const p = i32At(result.parent, k); if (p >= 0) setI32(result.parent, k, i32At(number, p)); }
}
