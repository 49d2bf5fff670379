/** What the pattern alone decides: where each entry of L lies, which panels update which, how much memory a factorization needs.
 *  Numbers of one pattern come and go; this stays. Column c, row r below are in elimination order: A[order, order] = L Lᵀ. */
import { allocateArray, release } from "../memory/heap";

@unmanaged
export class Symbolic {
  /** Unknowns. */
  n: i32;
  /** Entries of A's lower triangle. */
  nnzA: i32;
  supernodes: i32;
  /** How the order was found (ordering/ordering.ts). */
  ordering: i32;
  /** States (block columns). */
  blocks: i32;
  /** Largest width, and largest width + below, of a supernode. */
  widest: i32;
  tallest: i32;
  /** Largest width × below (rounded up to even) of a supernode. */
  largestBelow: f64;
  /** Entries of L, without the zeros that panels store. */
  nonzeros: f64;
  /** Multiplications and additions of the factorization without stored zeros: Σ over columns of (entries)². */
  flops: f64;
  /** The same with stored zeros: what the panels really do. The measure of progress. */
  panelFlops: f64;
  /** f64 entries of all panels. */
  panelEntries: f64;
  /** f64 entries of the two update stacks of the factorization, and of the two front stacks of the selected inverse. */
  updateEntries: f64;
  frontEntries: f64;
  /** i32[n]: order[c] = caller's unknown in column c; place its inverse. */
  order: usize;
  place: usize;
  /** i32[n]: supernode of column c. */
  supernodeOf: usize;
  /** i32[supernodes + 1]: first column. */
  first: usize;
  /** i32[supernodes]: parent supernode, −1 for a root; children before parents, subtrees contiguous. */
  parent: usize;
  /** i32[supernodes + 1] and i32[]: rows below the diagonal square, ascending. */
  rowStart: usize;
  rows: usize;
  /** u32[supernodes + 1]: first entry of each panel, column-major: width columns of `lead` entries, the square on top. */
  panel: usize;
  /** i32[supernodes]: leading dimension of the panel, even, at least width + below. */
  lead: usize;
  /** i32[supernodes] twice, and pairs of i32: where the rows below stand in the parent's front (its columns, then its rows below),
   *  as runs runStart … runEnd − 1: position of the first, number of rows that follow one another there. */
  runStart: usize;
  runEnd: usize;
  runs: usize;
  /** i32[supernodes + 1] and i32[supernodes]: children, ascending. */
  childStart: usize;
  children: usize;
  /** u32[supernodes]: entry where the update matrix (below × below, leading dimension even) lies in the factorization's stacks. */
  update: usize;
  /** u32[supernodes]: entry where the front of the selected inverse lies in its stacks. */
  front: usize;
  /** i32[supernodes + 1] and triples of i32: entries of A that go into each panel, as runs: first index into A's values, first
   *  entry in the panel, number of entries; a negative number means that they go along a row of the panel, not down a column. */
  recordStart: usize;
  records: usize;
  /** Bytes held by all these tables. */
  bytes: f64;
}

export function allocateSymbolic(): Symbolic | null {
  const address = allocateArray(1, 8);
  if (!address) return null;
  assert(offsetof<Symbolic>() <= 256);
  memory.fill(address, 0, 256);
  return changetype<Symbolic>(address);
}

export function releaseSymbolic(s: Symbolic): void {
  release(s.order);
  release(s.place);
  release(s.supernodeOf);
  release(s.first);
  release(s.parent);
  release(s.rowStart);
  release(s.rows);
  release(s.panel);
  release(s.lead);
  release(s.runStart);
  release(s.runEnd);
  release(s.runs);
  release(s.childStart);
  release(s.children);
  release(s.update);
  release(s.front);
  release(s.recordStart);
  release(s.records);
  release(changetype<usize>(s));
}
