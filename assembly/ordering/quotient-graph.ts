/** The quotient graph of minimum degree: its arrays, filled from a graph in slices, and what keeps them in order.
 *  An eliminated vertex becomes an element: a list of the variables its column of the factor holds. A variable keeps a list of
 *  elements, then of variables, next to it. Equal variables form one supervariable.
 *  Source: Amestoy, Davis, Duff, "An approximate minimum degree ordering algorithm", SIAM J. Matrix Anal. Appl. 17 (1996). */
import { allocateArray, release } from "../memory/heap";
import { addI32, atI32, i32At, setI32 } from "../memory/access";
import { Graph } from "./graph";

/** Room for lists beyond the graph's own, entries a vertex. n suffices with a compaction now and then; with 7 n none was seen on
 *  nets, grids and patrols. */
const SPARE_ROOM = 7;
/** Budget units (about 1 ns each) for a vertex and an entry taken over from the graph, or moved. */
const LOAD_COST: f64 = 30;
const ENTRY_COST: f64 = 5;
/** Vertices taken over in one step. */
const CHUNK = 8192;

// States of a variable.
export const UNLISTED: u8 = 0;
export const LISTED: u8 = 1;
export const PENDING: u8 = 2; // touched in this pass, listed at its end

@unmanaged
export class MinimumDegree {
  graph: Graph;
  n: i32;
  /** Vertices and unknowns not yet eliminated. */
  verticesLeft: i32;
  unknownsLeft: i32;
  /** i32[n]: the elimination order; complete when `verticesLeft` is 0. */
  order: usize;
  /** Entries of L and Σ (column count)², over unknowns, of what has been eliminated. Exact: elements are the columns of L. */
  nonzeros: f64;
  flops: f64;
  /** Work done so far in budget units. */
  spent: f64;

  // The quotient graph. list i32[room] holds the lists, used up to `free`.
  list: usize;
  room: i32;
  free: i32;
  start: usize; // where the list of a variable or element begins
  length: usize; // its entries; 0 for what has been absorbed
  elements: usize; // of a variable: how many of its entries are elements, which come first; of an element: its pivot's unknowns
  weight: usize; // unknowns of a supervariable; negative while it is in the pivot's list, 0 once it is no variable any more
  degree: usize; // of a variable: bound of its degree; of an element: unknowns in its list
  parent: usize; // of an element: the element that absorbed it, −1 while there is none
  memberNext: usize; // vertices of a supervariable, chained in the order they will be eliminated
  memberLast: usize;
  // Marks: of an element, `tag` + unknowns outside the pivot's list while a pivot is at work, 0 once absorbed.
  stamp: usize;
  tag: i32;
  largestElement: i32;
  // Degree lists, doubly linked; while a pivot is at work `next` chains a bucket of equal hashes and `previous` holds the hash.
  head: usize;
  next: usize;
  previous: usize;
  state: usize; // u8[n]
  leastDegree: i32;
  pending: usize;
  pendingCount: i32;
  stage: i32;
  listed: i32; // of those pending
  bucket: usize;
  bucketMask: i32;
  // Classes. classes i32[n] is the caller's, or 0 for one class. byClass i32[n]: vertices sorted by class.
  classes: usize;
  byClass: usize;
  nextInClass: i32;
  classNow: i32;
  pivots: usize; // i32[n]: pivots in order, so that paths can be summed from the root
  pivotCount: i32;
  unknowns: i32;
  loaded: i32; // vertices whose lists have been copied
  arrays: usize; // the one block that holds all arrays but `list` and `head`
}

/** Starts an ordering of `graph`, which must outlive the job. `classes` i32[n] with values in [0, n), or 0. Null: no memory. */
export function minimumDegreeBegin(graph: Graph, classes: usize): MinimumDegree | null {
  const n = graph.n, edges = i32At(graph.start, n);
  const m = changetype<MinimumDegree>(allocateArray(<f64>offsetof<MinimumDegree>(), 0));
  if (!changetype<usize>(m)) return null;
  memory.fill(changetype<usize>(m), 0, offsetof<MinimumDegree>());
  let unknowns: i64 = 0;
  for (let v = 0; v < n; ++v) unknowns += i32At(graph.weight, v);
  m.graph = graph;
  let buckets = 16;
  while (buckets < n) buckets <<= 1;
  m.room = edges + SPARE_ROOM * n + 1;
  m.list = allocateArray(<f64>m.room, 2);
  m.head = allocateArray(<f64>unknowns + 1, 2);
  m.arrays = allocateArray(17 * <f64>n + <f64>buckets + 1, 2);
  if (!m.list || !m.head || !m.arrays) { minimumDegreeRelease(m); return null; }
  const stride = <usize>n << 2;
  let at = m.arrays;
  m.order = at; at += stride;
  m.start = at; at += stride;
  m.length = at; at += stride;
  m.elements = at; at += stride;
  m.weight = at; at += stride;
  m.degree = at; at += stride;
  m.parent = at; at += stride;
  m.memberNext = at; at += stride;
  m.memberLast = at; at += stride;
  m.stamp = at; at += stride;
  m.next = at; at += stride;
  m.previous = at; at += stride;
  m.pending = at; at += stride;
  m.byClass = at; at += stride;
  m.pivots = at; at += stride;
  m.state = at; at += stride; // a quarter of it
  m.bucket = at;
  m.bucketMask = buckets - 1;
  m.n = n;
  m.verticesLeft = n;
  m.unknowns = <i32>unknowns;
  m.unknownsLeft = <i32>unknowns;
  m.free = edges;
  m.tag = 2;
  m.classes = classes;
  m.classNow = -1;
  return m;
}

export function minimumDegreeRelease(m: MinimumDegree): void {
  release(m.list);
  release(m.head);
  release(m.arrays);
  release(changetype<usize>(m));
}

/** Copies the lists of some more vertices, and prepares as large a part of what is not numbered by vertices. */
export function loadSome(m: MinimumDegree): void {
  const graph = m.graph, n = m.n, from = m.loaded, to = min(from + CHUNK, n);
  const first = i32At(graph.start, from), end = i32At(graph.start, to), bytes = <usize>(to - from) << 2;
  memory.copy(atI32(m.list, first), atI32(graph.adjacent, first), <usize>(end - first) << 2);
  memory.copy(atI32(m.weight, from), atI32(graph.weight, from), bytes);
  memory.fill(atI32(m.parent, from), 0xff, bytes);
  memory.fill(atI32(m.memberNext, from), 0xff, bytes);
  memory.fill(atI32(m.elements, from), 0, bytes);
  memory.fill(m.state + from, UNLISTED, to - from);
  for (let v = from; v < to; ++v) {
    const p0 = i32At(graph.start, v), p1 = i32At(graph.start, v + 1);
    setI32(m.start, v, p0);
    setI32(m.length, v, p1 - p0);
    setI32(m.memberLast, v, v);
    setI32(m.stamp, v, 1);
    let degree = 0;
    for (let p = p0; p < p1; ++p) degree += i32At(graph.weight, i32At(graph.adjacent, p));
    setI32(m.degree, v, degree);
  }
  fillPart(m.head, m.unknowns + 1, from, to, n);
  fillPart(m.bucket, m.bucketMask + 1, from, to, n);
  m.loaded = to;
  if (to == n) sortByClass(m);
  m.spent += <f64>(to - from) * LOAD_COST + <f64>(end - first) * ENTRY_COST;
}

/** −1 in that part of an i32[size] that from … to is of 0 … n. */
function fillPart(array: usize, size: i32, from: i32, to: i32, n: i32): void {
  const first = <i32>(<i64>size * from / n), end = <i32>(<i64>size * to / n);
  memory.fill(atI32(array, first), 0xff, <usize>(end - first) << 2);
}

/** byClass: vertices by ascending class, descending number, as lists are filled from the front. A sort by counting. */
function sortByClass(m: MinimumDegree): void {
  const n = m.n;
  if (!m.classes) { for (let v = 0; v < n; ++v) setI32(m.byClass, n - 1 - v, v); return; }
  const count = m.pivots; // not yet in use
  memory.fill(count, 0, <usize>n << 2);
  for (let v = 0; v < n; ++v) addI32(count, i32At(m.classes, v), 1);
  for (let c = 0, sum = 0; c < n; ++c) { const size = i32At(count, c); setI32(count, c, sum); sum += size; }
  for (let v = n - 1; v >= 0; --v) {
    const c = i32At(m.classes, v), at = i32At(count, c);
    setI32(m.byClass, at, v);
    setI32(count, c, at + 1);
  }
}

/** A tag above every stamp, far enough from the end of 32 bits for this pivot; stamps start over when it comes near. */
export function freshTag(m: MinimumDegree): i32 {
  const most = m.unknownsLeft + m.n;
  if (m.tag > i32.MAX_VALUE - 4 * m.n - 2 * most || m.tag < 2) {
    for (let v = 0; v < m.n; ++v) if (i32At(m.stamp, v) != 0) setI32(m.stamp, v, 1);
    m.tag = 2;
  }
  return m.tag;
}

/** Moves all lists to the front of the room, in their present order. */
export function compact(m: MinimumDegree): void {
  const list = m.list, start = m.start, length = m.length, n = m.n;
  // The first entry of each list makes way for a mark that names the owner.
  for (let v = 0; v < n; ++v) {
    if (i32At(length, v) == 0) continue;
    const at = i32At(start, v);
    setI32(start, v, i32At(list, at));
    setI32(list, at, ~v);
  }
  let put = 0;
  for (let q = 0; q < m.free;) {
    const v = ~i32At(list, q);
    if (v < 0) { ++q; continue; }
    const size = i32At(length, v);
    setI32(list, put, i32At(start, v));
    setI32(start, v, put);
    memory.copy(atI32(list, put + 1), atI32(list, q + 1), <usize>(size - 1) << 2);
    put += size;
    q += size;
  }
  m.free = put;
  m.spent += ENTRY_COST * <f64>n;
}
