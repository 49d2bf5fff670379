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
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { Graph } from "./graph";
import { LISTED, MinimumDegree, PENDING, UNLISTED, compact, freshTag, loadSome } from "./quotient-graph";

/** Budget units (about 1 ns each) for a pivot and for an entry read: medians over nets and grids of 10⁴ to 10⁶ vertices. */
const PIVOT_COST: f64 = 150;
const ENTRY_COST: f64 = 5;
/** The same for a vertex put into a degree list. */
const LIST_COST: f64 = 10;
/** The same for a whole order, for a vertex and for an entry of the graph. */
const VERTEX_WORK: f64 = 100;
const ENTRY_WORK: f64 = 20;
/** Vertices handled before the budget is looked at. */
const CHUNK = 8192;

// Stages of a pass.
const LIST_TOUCHED = 0;
const LIST_CLASS = 1;
const PIVOTS = 2;

/** Eliminates until about `budget` units of work are done. OK when all vertices are ordered, else RUNNING. */
export function minimumDegreeAdvance(m: MinimumDegree, budget: f64): i32 {
  const stop = m.spent + budget;
  while (m.loaded < m.n) {
    if (m.spent >= stop) return RUNNING;
    loadSome(m);
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

/** Adds the columns of a pivot of `own` unknowns with `below` unknowns in its element. */
// @ts-ignore: decorator
@inline function countColumns(m: MinimumDegree, own: f64, below: f64): void {
  // Counts run from below + 1 to below + own: their sum, and the sum of their squares.
  m.nonzeros += own * below + own * (own + 1) * 0.5;
  m.flops += own * below * below + below * own * (own + 1) + own * (own + 1) * (2 * own + 1) / 6;
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
