/** Approximate minimum degree on the quotient graph, weighted, by classes, with several independent pivots a pass.
 *
 *  An eliminated vertex becomes an element: a list of the variables its column of the factor holds. A variable keeps a list of
 *  elements, then of variables, next to it. Eliminating p merges p's elements and variables into one new element, prunes the lists
 *  of its variables, and bounds their degrees from above. Variables with equal lists join one supervariable; variables next to
 *  nothing but the new element are eliminated with it (mass elimination); an element inside the new one is absorbed even if not
 *  next to p (aggressive absorption). A pass eliminates all variables of least degree that no pivot of the pass has touched.
 *  Classes: a vertex of a later class is eliminated after every vertex of an earlier one, and never joins one.
 *  Sources: Amestoy, Davis, Duff, "An approximate minimum degree ordering algorithm", SIAM J. Matrix Anal. Appl. 17 (1996);
 *  Liu, "Modification of the minimum-degree algorithm by multiple elimination", ACM Trans. Math. Softw. 11 (1985). */
import { allocateArray, release } from "../memory/heap";
import { addI32, atI32, f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { Graph } from "./graph";

/** Room for lists beyond the graph's own, entries a vertex. n suffices with a compaction now and then; with 7 n none was seen on
 *  nets, grids and patrols. */
const SPARE_ROOM = 7;
/** Budget units (about 1 ns each) for a pivot and for an entry read: medians over nets and grids of 10⁴ to 10⁶ vertices. */
const PIVOT_COST: f64 = 150;
const ENTRY_COST: f64 = 5;
/** The same for a vertex put into a degree list. */
const LIST_COST: f64 = 10;

/** The same for a whole order, for a vertex and for an entry of the graph. */
const VERTEX_WORK: f64 = 100;
const ENTRY_WORK: f64 = 20;
/** The same for a vertex that is taken over from the graph. */
const LOAD_COST: f64 = 30;
/** Vertices handled before the budget is looked at. */
const CHUNK = 8192;

const UNLISTED: u8 = 0;
const LISTED: u8 = 1;
const PENDING: u8 = 2; // touched in this pass, listed at its end

// Stages of a pass.
const LIST_TOUCHED = 0;
const LIST_CLASS = 1;
const PIVOTS = 2;

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

/** Eliminates until about `budget` units of work are done. OK when all vertices are ordered, else RUNNING. */
export function minimumDegreeAdvance(m: MinimumDegree, budget: f64): i32 {
  const stop = m.spent + budget;
  while (m.loaded < m.n) {
    if (m.spent >= stop) return RUNNING;
    loadSome(m);
    if (m.loaded == m.n) sortByClass(m);
  }
  while (m.verticesLeft > 0) {
    if (m.spent >= stop) return RUNNING;
    if (m.stage == PIVOTS) {
      const p = i32At(m.head, m.leastDegree);
      if (p >= 0) eliminate(m, p);
      else { m.stage = LIST_TOUCHED; m.listed = 0; }
    } else if (m.stage == LIST_TOUCHED) listTouched(m);
    else listClass(m);
  }
  return OK;
}

/** Copies the lists of some more vertices, and prepares as large a part of what is not numbered by vertices. */
function loadSome(m: MinimumDegree): void {
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

/** Lists some more of what the last pass has touched, then goes on with the least degree; with the next class if there is none. */
function listTouched(m: MinimumDegree): void {
  const from = m.listed, to = min(from + CHUNK, m.pendingCount);
  for (let k = from; k < to; ++k) {
    const v = i32At(m.pending, k);
    if (i32At(m.weight, v) <= 0) continue; // eliminated or joined another since
    store<u8>(m.state + v, UNLISTED);
    if (m.classes && i32At(m.classes, v) != m.classNow) continue;
    enlist(m, v);
    m.leastDegree = min(m.leastDegree, i32At(m.degree, v));
  }
  m.spent += <f64>(to - from) * LIST_COST;
  m.listed = to;
  if (to < m.pendingCount) return;
  m.pendingCount = 0;
  if (findLeast(m)) { m.stage = PIVOTS; return; }
  m.stage = LIST_CLASS;
  m.leastDegree = 0;
  assert(m.nextInClass < m.n, "vertices are left over when the classes are used up");
  m.classNow = m.classes ? i32At(m.classes, i32At(m.byClass, m.nextInClass)) : 0;
}

/** Lists some more vertices of the class that begins. Those of later classes keep their degrees up to date meanwhile, unlisted. */
function listClass(m: MinimumDegree): void {
  const from = m.nextInClass, to = min(from + CHUNK, m.n);
  let at = from;
  for (; at < to; ++at) {
    const v = i32At(m.byClass, at);
    if (m.classes && i32At(m.classes, v) != m.classNow) break;
    if (i32At(m.weight, v) > 0) enlist(m, v);
  }
  m.spent += <f64>(at - from) * LIST_COST;
  m.nextInClass = at;
  if (at == to && to < m.n) return;
  findLeast(m);
  m.stage = PIVOTS;
}

/** Moves on to the least degree listed. False when none is. */
function findLeast(m: MinimumDegree): bool {
  let least = m.leastDegree;
  while (least <= m.unknownsLeft && i32At(m.head, least) < 0) ++least;
  m.leastDegree = min(least, m.unknownsLeft);
  return least <= m.unknownsLeft;
}

// @ts-ignore: decorator
@inline function enlist(m: MinimumDegree, v: i32): void {
  const d = i32At(m.degree, v), first = i32At(m.head, d);
  setI32(m.next, v, first);
  setI32(m.previous, v, -1);
  if (first >= 0) setI32(m.previous, first, v);
  setI32(m.head, d, v);
  store<u8>(m.state + v, LISTED);
}

// @ts-ignore: decorator
@inline function unlist(m: MinimumDegree, v: i32): void {
  const before = i32At(m.previous, v), after = i32At(m.next, v);
  if (after >= 0) setI32(m.previous, after, before);
  if (before >= 0) setI32(m.next, before, after); else setI32(m.head, i32At(m.degree, v), after);
}

/** Moves variable i into the pivot's list: one entry at `last`, its weight negated as a mark. Gives its weight, 0 if it is in
 *  the list already or no variable. */
// @ts-ignore: decorator
@inline function collect(m: MinimumDegree, weight: usize, state: usize, list: usize, last: i32, i: i32): i32 {
  const w = i32At(weight, i);
  if (w <= 0) return 0;
  setI32(weight, i, -w);
  setI32(list, last, i);
  const s = load<u8>(state + i);
  if (s == LISTED) unlist(m, i);
  if (s != PENDING) {
    store<u8>(state + i, PENDING);
    setI32(m.pending, m.pendingCount++, i);
  }
  return w;
}

function eliminate(m: MinimumDegree, p: i32): void {
  const list = m.list, start = m.start, length = m.length, elements = m.elements, weight = m.weight, degree = m.degree;
  const stamp = m.stamp, parent = m.parent, state = m.state, next = m.next, previous = m.previous, classes = m.classes;
  let visits = 0;

  // The pivot's list, from its elements and its variables; in place when it has no elements.
  unlist(m, p);
  let pivotWeight = i32At(weight, p);
  const ownElements = i32At(elements, p), ownLength = i32At(length, p);
  let unknowns = 0; // in the list
  let first = i32At(start, p), last = first;
  if (ownElements == 0) {
    setI32(weight, p, -pivotWeight);
    for (let q = first, end = first + ownLength; q < end; ++q) {
      const w = collect(m, weight, state, list, last, i32At(list, q));
      unknowns += w;
      last += i32(w > 0);
    }
    visits += ownLength;
  } else {
    let most = ownLength - ownElements;
    for (let q = first, end = first + ownElements; q < end; ++q) most += i32At(length, i32At(list, q));
    visits += most;
    // Lists never grow beyond the graph's own entries, so n of spare room is enough after a compaction.
    if (m.free + min(most, m.verticesLeft) > m.room) compact(m);
    setI32(weight, p, -pivotWeight);
    const own = i32At(start, p);
    first = m.free;
    last = first;
    for (let r = own, end = own + ownElements; r < end; ++r) {
      const e = i32At(list, r), from = i32At(start, e);
      for (let q = from, stop = from + i32At(length, e); q < stop; ++q) {
        const w = collect(m, weight, state, list, last, i32At(list, q));
        unknowns += w;
        last += i32(w > 0);
      }
      setI32(parent, e, p);
      setI32(stamp, e, 0);
      setI32(length, e, 0);
    }
    for (let q = own + ownElements, end = own + ownLength; q < end; ++q) {
      const w = collect(m, weight, state, list, last, i32At(list, q));
      unknowns += w;
      last += i32(w > 0);
    }
  }

  // Unknowns of every neighbouring element outside the pivot's list, as stamp − tag.
  const tag = freshTag(m);
  for (let q = first; q < last; ++q) {
    const i = i32At(list, q), w = -i32At(weight, i), from = i32At(start, i), count = i32At(elements, i);
    visits += count;
    for (let r = from, end = from + count; r < end; ++r) {
      const e = i32At(list, r), s = i32At(stamp, e);
      if (s >= tag) setI32(stamp, e, s - w);
      else if (s != 0) setI32(stamp, e, i32At(degree, e) + tag - w);
    }
  }

  // Prune the lists of its variables, bound their degrees outside the new element, and hash what is left.
  const pivotClass = classes ? i32At(classes, p) : 0;
  for (let q = first; q < last; ++q) {
    const i = i32At(list, q), from = i32At(start, i), split = from + i32At(elements, i), end = from + i32At(length, i);
    visits += end - from;
    let put = from, outside = 0, hash = 0;
    for (let r = from; r < split; ++r) {
      const e = i32At(list, r), s = i32At(stamp, e);
      if (s == 0) continue;
      if (s > tag) {
        outside += s - tag;
        setI32(list, put++, e);
        hash += e;
      } else { // inside the new element
        setI32(parent, e, p);
        setI32(stamp, e, 0);
        setI32(length, e, 0);
      }
    }
    const variables = put;
    for (let r = split; r < end; ++r) {
      const j = i32At(list, r), w = i32At(weight, j);
      if (w <= 0) continue;
      outside += w;
      setI32(list, put++, j);
      hash += j;
    }
    if (outside == 0 && (!classes || i32At(classes, i) == pivotClass)) {
      const w = -i32At(weight, i);
      pivotWeight += w;
      unknowns -= w;
      setI32(weight, i, 0);
      setI32(length, i, 0);
      join(m, p, i);
      continue;
    }
    setI32(degree, i, min(i32At(degree, i), outside));
    // The new element goes first; the place is there, as i has lost p or an element of p's.
    setI32(list, put, i32At(list, variables));
    setI32(list, variables, i32At(list, from));
    setI32(list, from, p);
    setI32(elements, i, variables - from + 1);
    setI32(length, i, put - from + 1);
    const b = (hash ^ (hash >> 15)) & m.bucketMask;
    setI32(previous, i, hash);
    setI32(next, i, i32At(m.bucket, b));
    setI32(m.bucket, b, i);
  }
  m.tag = tag + m.largestElement + 1;
  visits += joinIndistinguishable(m, first, last);

  // What is left of the list is the element; degrees are complete now.
  m.unknownsLeft -= pivotWeight;
  let put = first;
  for (let q = first; q < last; ++q) {
    const i = i32At(list, q), w = -i32At(weight, i);
    if (w <= 0) continue;
    setI32(weight, i, w);
    setI32(degree, i, min(i32At(degree, i) + unknowns, m.unknownsLeft) - w);
    setI32(list, put++, i);
  }
  setI32(weight, p, 0);
  setI32(start, p, first);
  setI32(length, p, put - first);
  setI32(elements, p, pivotWeight);
  setI32(degree, p, unknowns);
  setI32(stamp, p, put > first ? 1 : 0);
  if (ownElements != 0) m.free = put;
  m.largestElement = max(m.largestElement, unknowns);
  setI32(m.pivots, m.pivotCount++, p);
  let placed = m.n - m.verticesLeft;
  for (let v = p; v >= 0; v = i32At(m.memberNext, v)) setI32(m.order, placed++, v);
  m.verticesLeft = m.n - placed;
  countColumns(m, <f64>pivotWeight, <f64>unknowns);
  m.spent += PIVOT_COST + ENTRY_COST * <f64>visits;
}

/** Joins variables of the pivot's list whose element and variable lists are equal. Gives the entries read. */
function joinIndistinguishable(m: MinimumDegree, first: i32, last: i32): i32 {
  const list = m.list, start = m.start, length = m.length, elements = m.elements, weight = m.weight, degree = m.degree;
  const stamp = m.stamp, next = m.next, previous = m.previous, classes = m.classes;
  let tag = m.tag, visits = 0;
  for (let q = first; q < last; ++q) {
    const some = i32At(list, q);
    if (i32At(weight, some) == 0) continue;
    const hashOfSome = i32At(previous, some), b = (hashOfSome ^ (hashOfSome >> 15)) & m.bucketMask;
    const chain = i32At(m.bucket, b);
    setI32(m.bucket, b, -1);
    for (let i = chain; i >= 0; i = i32At(next, i)) {
      if (i32At(next, i) < 0) break;
      const size = i32At(length, i), from = i32At(start, i), hash = i32At(previous, i), count = i32At(elements, i);
      let marked = false;
      for (let before = i, j = i32At(next, i); j >= 0;) {
        const after = i32At(next, j);
        let equal = i32At(previous, j) == hash && i32At(length, j) == size && i32At(elements, j) == count &&
          (!classes || i32At(classes, i) == i32At(classes, j));
        if (equal) {
          if (!marked) {
            marked = true;
            ++tag;
            for (let r = from + 1, end = from + size; r < end; ++r) setI32(stamp, i32At(list, r), tag); // both begin with the pivot
          }
          let r = i32At(start, j) + 1;
          const end = r + size - 1;
          while (r < end && i32At(stamp, i32At(list, r)) == tag) ++r;
          equal = r == end;
          visits += size;
        }
        if (equal) {
          setI32(weight, i, i32At(weight, i) + i32At(weight, j));
          setI32(degree, i, min(i32At(degree, i), i32At(degree, j)));
          setI32(weight, j, 0);
          setI32(length, j, 0);
          join(m, i, j);
          setI32(next, before, after);
        } else before = j;
        j = after;
      }
    }
  }
  m.tag = tag + 1;
  return visits;
}

/** Appends the vertices of supervariable j to those of i. */
// @ts-ignore: decorator
@inline function join(m: MinimumDegree, i: i32, j: i32): void {
  setI32(m.memberNext, i32At(m.memberLast, i), j);
  setI32(m.memberLast, i, i32At(m.memberLast, j));
}

/** A tag above every stamp, far enough from the end of 32 bits for this pivot; stamps start over when it comes near. */
function freshTag(m: MinimumDegree): i32 {
  const most = m.unknownsLeft + m.n;
  if (m.tag > i32.MAX_VALUE - 4 * m.n - 2 * most || m.tag < 2) {
    for (let v = 0; v < m.n; ++v) if (i32At(m.stamp, v) != 0) setI32(m.stamp, v, 1);
    m.tag = 2;
  }
  return m.tag;
}

/** Adds the columns of a pivot of `own` unknowns with `below` unknowns in its element. */
// @ts-ignore: decorator
@inline function countColumns(m: MinimumDegree, own: f64, below: f64): void {
  // Counts run from below + 1 to below + own: their sum, and the sum of their squares.
  m.nonzeros += own * below + own * (own + 1) * 0.5;
  m.flops += own * below * below + below * own * (own + 1) + own * (own + 1) * (2 * own + 1) / 6;
}

/** Moves all lists to the front of the room, in their present order. */
function compact(m: MinimumDegree): void {
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

/** Entries of L on the way from each unknown to the root, for the unknowns of the pivots first … end − 1, those after them done; gives
 *  their sum over unknowns. pathOf f64[n], by vertex, gets each one's path. Upper bounds: an element's parent is the pivot that absorbed
 *  it, from that one's first vertex on, and the true parent can lie later. */
export function minimumDegreePaths(m: MinimumDegree, pathOf: usize, first: i32, end: i32): f64 {
  let sum: f64 = 0;
  for (let k = end - 1; k >= first; --k) {
    const p = i32At(m.pivots, k), up = i32At(m.parent, p), own = <f64>i32At(m.elements, p);
    let count = own + <f64>i32At(m.degree, p); // of the first column
    let path = own * count - own * (own - 1) * 0.5 + (up >= 0 ? f64At(pathOf, up) : 0);
    for (let v = p; v >= 0; v = i32At(m.memberNext, v)) {
      const w = <f64>i32At(m.graph.weight, v);
      setF64(pathOf, v, path);
      sum += w * path;
      path -= w * count - w * (w - 1) * 0.5;
      count -= w;
    }
  }
  return sum;
}

/** What ordering `graph` will cost, in budget units. */
export function minimumDegreeWork(graph: Graph): f64 {
  return VERTEX_WORK * <f64>graph.n + ENTRY_WORK * <f64>i32At(graph.start, graph.n);
}
