/** Peels a graph down to its core before it is ordered: hubs off, then vertices with at most two neighbours in independent passes.
 *
 *  A pass visits the vertices of degree at most 2 and eliminates those no neighbour of which has gone in the same pass. On a chain
 *  that is cyclic reduction: every other vertex goes, and the elimination tree is as deep as the logarithm of the chain. A vertex
 *  of degree 2 leaves an edge between its neighbours, so lists never grow. A hub, tied to far more vertices than others are, would
 *  keep everything adjacent to it apart and make each list long; it is ordered last.
 *  Sources: Buzbee, Golub, Nielson, "On direct methods for solving Poisson's equations", SIAM J. Numer. Anal. 7 (1970) (cyclic
 *  reduction); Amestoy, Davis, Duff (1996), section on dense rows. */
import { allocateArray, release } from "../memory/heap";
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";
import { Graph } from "./graph";

/** A hub has more neighbours than this, and than HUB_FACTOR times the mean. Without hubs a clock offset tied to everything made
 *  minimum degree 57 times slower. */
const HUB_LEAST = 40;
const HUB_FACTOR: f64 = 10;
/** Budget units (about 1 ns each) for a vertex and for an entry, in one phase. */
const VERTEX_COST: f64 = 4;
const ENTRY_COST: f64 = 1.5;

const KEPT: u8 = 0;
const WAITING: u8 = 1; // in the queue of a pass
const PEELED: u8 = 2;
const HUB: u8 = 3;

const COPY = 0;
const PEEL = 1;
const NUMBER = 2;
const CORE = 3;
const DONE = 4;

@unmanaged
export class Peel {
  graph: Graph;
  /** The order's two ends: i32[n], peeled vertices from the front, hubs at the end, a gap for the core between. */
  order: usize;
  peeled: i32;
  hubs: i32;
  /** What is left, with its own memory: vertex c of the core is coreVertex[c] of the graph. There once the status is OK. */
  core: Graph;
  coreVertex: usize;
  /** Entries of L and Σ (column count)² of the peeled columns, rows of hubs left out. */
  nonzeros: f64;
  flops: f64;
  /** Unknowns of the peeled vertices. */
  unknowns: i32;
  spent: f64;

  phase: i32;
  cursor: i32;
  hubDegree: i32; // more neighbours than this make a hub
  list: usize; // neighbours of v: list[graph.start[v]] …, `length` of them
  length: usize;
  state: usize; // u8[n]
  touched: usize; // i32[n]: the last pass that eliminated a neighbour; later the vertex's number in the core
  queue: usize; // this pass's vertices, and
  later: usize; // the next one's
  queued: i32;
  laterCount: i32;
  pass: i32;
  first: usize; // i32[n]: neighbours of a peeled vertex when it went, −1 for none
  second: usize;
}

/** Starts to peel `graph`, which must outlive the job. Null: no memory. */
export function peelBegin(graph: Graph): Peel | null {
  const n = graph.n, edges = i32At(graph.start, n);
  const p = changetype<Peel>(allocateArray(<f64>offsetof<Peel>(), 0));
  if (!changetype<usize>(p)) return null;
  memory.fill(changetype<usize>(p), 0, offsetof<Peel>());
  p.graph = graph;
  const core = allocateArray(<f64>offsetof<Graph>(), 0);
  if (core) memory.fill(core, 0, offsetof<Graph>());
  p.core = changetype<Graph>(core);
  p.order = allocateArray(<f64>n + 1, 2);
  p.list = allocateArray(<f64>edges + 1, 2);
  p.length = allocateArray(<f64>n + 1, 2);
  p.state = allocateArray(<f64>n + 1, 0);
  p.touched = allocateArray(<f64>n + 1, 2);
  p.queue = allocateArray(<f64>n + 1, 2);
  p.later = allocateArray(<f64>n + 1, 2);
  p.first = allocateArray(<f64>n + 1, 2);
  p.second = allocateArray(<f64>n + 1, 2);
  if (!core || !p.order || !p.list || !p.length || !p.state || !p.touched || !p.queue || !p.later || !p.first || !p.second) {
    peelRelease(p);
    return null;
  }
  const mean = n ? <f64>edges / <f64>n : 0;
  p.hubDegree = <i32>max(<f64>HUB_LEAST, HUB_FACTOR * mean);
  return p;
}

export function peelRelease(p: Peel): void {
  if (changetype<usize>(p.core)) {
    release(p.core.start);
    release(p.core.adjacent);
    release(p.core.weight);
    release(changetype<usize>(p.core));
  }
  release(p.coreVertex);
  release(p.order);
  release(p.list);
  release(p.length);
  release(p.state);
  release(p.touched);
  release(p.queue);
  release(p.later);
  release(p.first);
  release(p.second);
  release(changetype<usize>(p));
}

/** Works for about `budget` units. */
export function peelAdvance(p: Peel, budget: f64): i32 {
  const stop = p.spent + budget;
  while (p.phase != DONE) {
    if (p.spent >= stop) return RUNNING;
    const left = stop - p.spent;
    if (p.phase == COPY) copyLists(p, left);
    else if (p.phase == PEEL) peelSome(p, left);
    else if (p.phase == NUMBER) { if (!numberCore(p)) return OUT_OF_MEMORY; }
    else copyCore(p, left);
  }
  return OK;
}

/** Copies the lists of some more vertices without hubs, and queues the vertices to peel. */
function copyLists(p: Peel, budget: f64): void {
  const graph = p.graph, n = graph.n, start = graph.start, hubDegree = p.hubDegree;
  let v = p.cursor, work: f64 = 0;
  for (; v < n && work < budget; ++v) {
    const from = i32At(start, v), end = i32At(start, v + 1);
    work += VERTEX_COST + ENTRY_COST * <f64>(end - from);
    setI32(p.touched, v, -1);
    if (end - from > hubDegree) {
      store<u8>(p.state + v, HUB);
      setI32(p.order, n - ++p.hubs, v);
      continue;
    }
    let put = from;
    for (let q = from; q < end; ++q) {
      const u = i32At(graph.adjacent, q);
      setI32(p.list, put, u);
      put += i32(i32At(start, u + 1) - i32At(start, u) <= hubDegree);
    }
    setI32(p.length, v, put - from);
    const low = put - from <= 2;
    store<u8>(p.state + v, low ? WAITING : KEPT);
    if (low) setI32(p.queue, p.queued++, v);
  }
  p.cursor = v;
  p.spent += work;
  if (v == n) { p.phase = PEEL; p.cursor = 0; }
}

/** Goes on with the present pass, and with the next ones, until the budget is used or nothing is left to peel. */
function peelSome(p: Peel, budget: f64): void {
  const graph = p.graph, start = graph.start, weight = graph.weight, list = p.list, length = p.length, touched = p.touched, state = p.state;
  let work: f64 = 0, at = p.cursor;
  while (work < budget) {
    if (at == p.queued) { // the pass is over
      const swap = p.queue;
      p.queue = p.later;
      p.later = swap;
      p.queued = p.laterCount;
      p.laterCount = 0;
      ++p.pass;
      at = 0;
      if (p.queued == 0) { p.phase = NUMBER; break; }
    }
    const v = i32At(p.queue, at++), pass = p.pass;
    if (i32At(touched, v) == pass) { setI32(p.later, p.laterCount++, v); continue; }
    store<u8>(state + v, PEELED);
    setI32(p.order, p.peeled++, v);
    p.unknowns += i32At(weight, v);
    const degree = i32At(length, v), own = <f64>i32At(weight, v), base = i32At(start, v);
    const a = degree > 0 ? i32At(list, base) : -1, b = degree > 1 ? i32At(list, base + 1) : -1;
    setI32(p.first, v, a);
    setI32(p.second, v, b);
    let below: f64 = 0;
    if (a >= 0) below += <f64>i32At(weight, a);
    if (b >= 0) below += <f64>i32At(weight, b);
    p.nonzeros += own * below + own * (own + 1) * 0.5;
    p.flops += own * below * below + below * own * (own + 1) + own * (own + 1) * (2 * own + 1) / 6;
    work += 4 * VERTEX_COST;
    if (a < 0) continue;
    work += ENTRY_COST * <f64>replace(p, a, v, b);
    if (b >= 0) work += ENTRY_COST * <f64>replace(p, b, v, a);
  }
  p.cursor = at;
  p.spent += work;
}

/** In the list of u, puts `by` where v was, or drops v when `by` is there already or −1. Gives the entries read. */
function replace(p: Peel, u: i32, v: i32, by: i32): i32 {
  const base = i32At(p.graph.start, u), size = i32At(p.length, u), list = p.list;
  let at = -1, known = by < 0;
  for (let q = base, end = base + size; q < end; ++q) {
    const x = i32At(list, q);
    if (x == v) at = q;
    known = known || x == by;
  }
  setI32(p.touched, u, p.pass);
  if (known) {
    setI32(list, at, i32At(list, base + size - 1));
    setI32(p.length, u, size - 1);
    if (size - 1 <= 2 && load<u8>(p.state + u) == KEPT) {
      store<u8>(p.state + u, WAITING);
      setI32(p.later, p.laterCount++, u);
    }
  } else setI32(list, at, by);
  return size;
}

/** Numbers the vertices left over and makes room for their graph. False when memory runs out. */
function numberCore(p: Peel): bool {
  const n = p.graph.n, left = n - p.peeled - p.hubs, core = p.core;
  p.coreVertex = allocateArray(<f64>left + 1, 2);
  core.start = allocateArray(<f64>left + 1, 2);
  core.weight = allocateArray(<f64>left + 1, 2);
  if (!p.coreVertex || !core.start || !core.weight) return false;
  let c = 0, m = 0;
  for (let v = 0; v < n; ++v) {
    if (load<u8>(p.state + v) != KEPT) continue;
    setI32(p.touched, v, c);
    setI32(p.coreVertex, c, v);
    setI32(core.weight, c, i32At(p.graph.weight, v));
    setI32(core.start, c, m);
    m += i32At(p.length, v);
    ++c;
  }
  setI32(core.start, c, m);
  core.n = c;
  core.adjacent = allocateArray(<f64>m + 1, 2);
  p.spent += 2 * <f64>n;
  p.phase = CORE;
  p.cursor = 0;
  return core.adjacent != 0;
}

/** Writes the lists of some more vertices of the core, sorted. */
function copyCore(p: Peel, budget: f64): void {
  const core = p.core;
  let c = p.cursor, work: f64 = 0;
  for (; c < core.n && work < budget; ++c) {
    const from = i32At(p.graph.start, i32At(p.coreVertex, c)), to = i32At(core.start, c), size = i32At(core.start, c + 1) - to;
    work += VERTEX_COST + ENTRY_COST * <f64>size;
    for (let k = 0; k < size; ++k) { // peeling has moved few entries: insertion sort
      const x = i32At(p.touched, i32At(p.list, from + k));
      let at = to + k;
      while (at > to && i32At(core.adjacent, at - 1) > x) { setI32(core.adjacent, at, i32At(core.adjacent, at - 1)); --at; }
      setI32(core.adjacent, at, x);
    }
  }
  p.cursor = c;
  p.spent += work;
  if (c == core.n) p.phase = DONE;
}

/** Share of the work done, 0 to 1, by what has been copied and peeled. */
export function peelProgress(p: Peel): f64 {
  if (p.phase == DONE) return 1;
  return min(0.99, p.spent / (peelWork(p.graph) + 1));
}

/** What peeling `graph` will cost, in budget units. */
export function peelWork(graph: Graph): f64 {
  return 3 * VERTEX_COST * <f64>graph.n + 2 * ENTRY_COST * <f64>i32At(graph.start, graph.n);
}

/** Entries of L on the way from each peeled unknown to the root, for the vertices peeled first-th … (end − 1)-th, those after them and
 *  the core done; gives their sum over unknowns. pathOf f64[graph.n] holds paths by vertex. Of two neighbours left by a vertex, one is
 *  an ancestor of the other: the way leads over the one with the longer path. Hubs are never among them. */
export function peelPaths(p: Peel, pathOf: usize, first: i32, end: i32): f64 {
  let sum: f64 = 0;
  for (let k = end - 1; k >= first; --k) {
    const v = i32At(p.order, k), a = i32At(p.first, v), b = i32At(p.second, v), own = <f64>i32At(p.graph.weight, v);
    let path: f64 = 0, below: f64 = 0;
    if (a >= 0) { path = f64At(pathOf, a); below = <f64>i32At(p.graph.weight, a); }
    if (b >= 0) { path = max(path, f64At(pathOf, b)); below += <f64>i32At(p.graph.weight, b); }
    path += own * below + own * (own + 1) * 0.5;
    setF64(pathOf, v, path);
    sum += own * path;
  }
  return sum;
}
