/** Nested dissection: the graph is cut by a small vertex separator, the parts are cut again, and so on. The answer is a class for
 *  each vertex, 0 in the parts left over, then one more for each level of separators up to the first; minimum degree by these
 *  classes orders parts before the separators that part them.
 *  A bisection coarsens the graph, cuts the coarsest one, and refines the separator on the way back.
 *  Sources: George (1973); Karypis, Kumar (1998); Ashcraft, Liu, "Robust ordering of sparse matrices using multisection", SIAM J.
 *  Matrix Anal. Appl. 19 (1998) (minimum degree over all with separators last). */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";
import { Graph } from "./graph";
import { Contraction, Level, closeCoarser, contractSome, matchSome, newLevel, openCoarser, releaseLevel, visitsOf } from "./coarsen";
import { Separator, newSeparator, refine, refineTowards, releaseSeparator, score } from "./separator";
import { Search, beginSearch, growRegion, levelSeparator, searchSome } from "./first-separator";

/** Levels of separators: 7 instead of 5 took 4 % off the flops of nets and patrols of 100 000 states, 9 % off a grid of 10⁶; 9 nothing
 *  more. */
const LEVELS = 7;
/** Parts of no more vertices are left to minimum degree. */
const LEAF = 300;
/** Coarsening stops at this many vertices, or when a step leaves more than this share. */
const COARSEST = 60;
const STALLED: f64 = 0.9;
/** Below this many vertices, the rest of the ladder is tried so many times and the best separator goes on. The second try took 7 % off
 *  the flops of nets of 10 000 states and 5 % off patrols; 32 tries up to the finest graph would take off another 10 % at ten times
 *  the cost. */
const MIDDLE = 5000;
const MIDDLE_TRIES = 2;
/** Regions grown on the coarsest graph; 16 were no better. */
const TRIES = 2;
/** Refinement passes a level. */
const PASSES = 6;
/** The most of the weight a side may hold: 0.65 took 2 to 10 % off the flops of all families against 0.6; 0.7 gave that back. */
const LARGEST_SIDE: f64 = 0.65;
/** Graphs above this many vertices try a breadth-first level as well. */
const TRY_LEVELS = 3000;
/** Budget units (about 1 ns each) that a level of separators costs for each entry of the graph: 80 to 240 over nets, patrols, spirals,
 *  landmarks and grids of 10⁴ to 10⁶ vertices. */
const LEVEL_COST: f64 = 130;
/** The same for a vertex and an entry looked at once, and for a vertex of a region to grow. */
const VERTEX_COST: f64 = 4;
const ENTRY_COST: f64 = 5;
const GROW_COST: f64 = 30;
/** Vertices handled before the budget is looked at. */
const CHUNK = 8192;

const NEXT = 0;
const MATCH = 1;
const CONTRACT = 2;
const GROW = 3;
const PROJECT = 4;
const REFINE = 5;
const BREADTH = 6;
const SPLIT = 7;
const EXTRACT = 8;
const DONE = 9;

@unmanaged
export class Dissection {
  n: i32;
  /** i32[n], complete once the status is OK. */
  classes: usize;
  spent: f64;
  /** Cuts done and cuts to do, each counted by the vertices it cuts. */
  cutVertices: f64;
  allVertices: f64;
  pieceBegan: f64; // `spent` when the piece at hand was begun
  phase: i32;
  cursor: i32;
  pieces: Level; // to be cut, chained
  level: Level; // of the ladder of the piece at hand
  coarse: Level; // being built
  at: Contraction;
  separator: Separator;
  search: Search;
  random: u32;
  // Workspaces i32[n] and i32[entries]
  mate: usize;
  place: usize;
  entriesA: usize;
  entriesB: usize;
  turn: i32;
  pass: i32;
  idle: i32;
  middle: Level; // of the ladder: where tries start
  tries: i32; // left
  bestScore: f64;
  growScore: f64;
  bestLabel: usize; // u8[n]
  fromLevel: bool; // the separator being refined came from a breadth-first level
  side: i32; // being extracted
  size0: i32; // vertices of the sides
  size1: i32;
}

/** Starts to dissect `graph`, which must outlive the job. Null: no memory. */
export function dissectionBegin(graph: Graph): Dissection | null {
  const n = graph.n, entries = i32At(graph.start, n);
  const d = changetype<Dissection>(allocateArray(<f64>offsetof<Dissection>(), 0));
  if (!changetype<usize>(d)) return null;
  memory.fill(changetype<usize>(d), 0, offsetof<Dissection>());
  d.n = n;
  d.random = 2463534242;
  d.at = changetype<Contraction>(allocateArray(<f64>offsetof<Contraction>(), 0));
  d.search = changetype<Search>(allocateArray(<f64>offsetof<Search>(), 0));
  d.classes = allocateArray(<f64>n + 1, 2);
  d.mate = allocateArray(<f64>n + 1, 2);
  d.place = allocateArray(<f64>n + 1, 2);
  d.entriesA = allocateArray(<f64>entries + 1, 2);
  d.bestLabel = allocateArray(<f64>n + 1, 0);
  d.entriesB = allocateArray(<f64>entries + 1, 2);
  const separator = newSeparator(n), root = newLevel();
  if (separator) d.separator = separator;
  if (root) d.pieces = root;
  if (!changetype<usize>(d.at) || !changetype<usize>(d.search) || !d.classes || !d.mate || !d.place || !d.bestLabel || !d.entriesA || !d.entriesB || !separator || !root) {
    dissectionRelease(d);
    return null;
  }
  root.n = n;
  root.start = graph.start;
  root.adjacent = graph.adjacent;
  root.weight = graph.weight;
  root.borrowed = true;
  for (let v = 0; v < n; ++v) root.total += i32At(graph.weight, v);
  memory.fill(d.classes, 0, <usize>n << 2);
  d.search.queue = d.mate; // matching and searching never overlap
  d.search.distance = d.place;
  d.allVertices = <f64>n * <f64>levelsOf(n);
  return d;
}

export function dissectionRelease(d: Dissection): void {
  releaseLadder(d);
  for (let piece = d.pieces; changetype<usize>(piece);) {
    const next = piece.next;
    releaseLevel(piece);
    piece = next;
  }
  if (changetype<usize>(d.coarse)) releaseLevel(d.coarse);
  if (changetype<usize>(d.separator)) releaseSeparator(d.separator);
  release(changetype<usize>(d.at));
  release(changetype<usize>(d.search));
  release(d.classes);
  release(d.mate);
  release(d.place);
  release(d.entriesA);
  release(d.entriesB);
  release(d.bestLabel);
  release(changetype<usize>(d));
}

/** Gives back the ladder of the piece at hand, piece included. */
function releaseLadder(d: Dissection): void {
  let level = d.level;
  d.level = changetype<Level>(0);
  if (!changetype<usize>(level)) return;
  while (changetype<usize>(level.coarser)) level = level.coarser;
  while (changetype<usize>(level)) {
    const finer = level.finer;
    releaseLevel(level);
    level = finer;
  }
}

/** Works for about `budget` units (about 1 ns each). OK, RUNNING or OUT_OF_MEMORY. */
export function dissectionAdvance(d: Dissection, budget: f64): i32 {
  const stop = d.spent + budget;
  while (d.phase != DONE) {
    if (d.spent >= stop) return RUNNING;
    let fits = true;
    switch (d.phase) {
      case NEXT: nextPiece(d); break;
      case MATCH: fits = stepMatch(d); break;
      case CONTRACT: fits = stepContract(d); break;
      case GROW: grow(d); break;
      case PROJECT: stepProject(d); break;
      case REFINE: stepRefine(d); break;
      case BREADTH: stepBreadth(d); break;
      case SPLIT: split(d); break;
      default: fits = stepExtract(d); break;
    }
    if (!fits) return OUT_OF_MEMORY;
  }
  return OK;
}

/** Levels of separators that a graph of n vertices gets, if its parts are equal. */
function levelsOf(n: i32): i32 {
  let levels = 0;
  for (; levels < LEVELS && n > LEAF; n >>= 1) ++levels;
  return levels;
}

/** What dissecting `graph` will cost, in budget units. 0: it is too small to be cut. */
export function dissectionWork(graph: Graph): f64 {
  return LEVEL_COST * <f64>i32At(graph.start, graph.n) * <f64>levelsOf(graph.n);
}

/** Share of the work done, 0 to 1. */
export function dissectionProgress(d: Dissection): f64 {
  if (d.phase == DONE || d.allVertices == 0) return 1;
  let done = d.cutVertices;
  if (changetype<usize>(d.level)) {
    let piece = d.level;
    while (changetype<usize>(piece.finer)) piece = piece.finer;
    const predicted = LEVEL_COST * <f64>i32At(piece.start, piece.n);
    done += <f64>piece.n * min(0.95, (d.spent - d.pieceBegan) / (predicted + 1));
  }
  return min(1, done / d.allVertices);
}

// @ts-ignore: decorator
@inline function worthCutting(n: i32, depth: i32): bool { return n > LEAF && depth < LEVELS; }

function nextPiece(d: Dissection): void {
  const piece = d.pieces;
  if (!changetype<usize>(piece)) { d.phase = DONE; return; }
  d.pieces = piece.next;
  if (!worthCutting(piece.n, piece.depth)) { releaseLevel(piece); return; }
  d.level = piece;
  d.pieceBegan = d.spent;
  d.fromLevel = false;
  d.middle = changetype<Level>(0);
  d.separator.limit = <i32>(LARGEST_SIDE * <f64>piece.total);
  beginMatch(d);
}

function beginMatch(d: Dissection): void {
  if (d.level.n <= MIDDLE && !changetype<usize>(d.middle)) {
    d.middle = d.level;
    d.tries = MIDDLE_TRIES;
    d.bestScore = Infinity;
  }
  if (d.level.n <= COARSEST) { beginGrow(d); return; }
  memory.fill(d.mate, 0xff, <usize>d.level.n << 2);
  d.phase = MATCH;
  d.turn = below(d, i32.MAX_VALUE);
  d.cursor = 0;
}

function stepMatch(d: Dissection): bool {
  const level = d.level, visits = visitsOf(level.n), to = min(d.cursor + CHUNK, visits);
  d.spent += matchSome(level, d.mate, max(2, level.total / (COARSEST / 3)), d.turn, d.cursor, to);
  d.cursor = to;
  if (to < visits) return true;
  const coarse = openCoarser(level, d.mate);
  if (!coarse) return false;
  if (<f64>coarse.n > STALLED * <f64>level.n) {
    releaseLevel(coarse);
    release(level.coarseOf);
    level.coarseOf = 0;
    beginGrow(d);
    return true;
  }
  d.coarse = coarse;
  memory.fill(d.place, 0xff, <usize>coarse.n << 2);
  d.at.fine = 0;
  d.at.coarse = 0;
  d.at.entries = 0;
  d.phase = CONTRACT;
  return true;
}

function stepContract(d: Dissection): bool {
  const level = d.level, coarse = d.coarse;
  d.spent += contractSome(level, coarse, d.mate, d.at, d.place, d.entriesA, d.entriesB, 100000);
  if (d.at.fine < level.n) return true;
  if (!closeCoarser(coarse, d.at.entries, d.entriesA, d.entriesB)) return false;
  d.coarse = changetype<Level>(0);
  coarse.finer = level;
  level.coarser = coarse;
  d.level = coarse;
  beginMatch(d);
  return true;
}

/** A number below n. Source: Marsaglia, "Xorshift RNGs", J. Stat. Softw. 8 (2003). */
function below(d: Dissection, n: i32): i32 {
  let x = d.random;
  x ^= x << 13;
  x ^= x >> 17;
  x ^= x << 5;
  d.random = x;
  return <i32>((<u64>x * <u64>n) >> 32);
}

function beginGrow(d: Dissection): void {
  d.phase = GROW;
  d.pass = 0;
  d.growScore = Infinity;
}

/** Cuts the coarsest graph: one more region, refined; the best goes on. */
function grow(d: Dissection): void {
  const g = d.level, s = d.separator, saved = d.entriesA;
  growRegion(s, g, below(d, g.n), d.search);
  refine(s, g, 2 * PASSES);
  if (score(s) < d.growScore) {
    d.growScore = score(s);
    memory.copy(saved, s.label, g.n);
  }
  d.spent += <f64>g.n * GROW_COST + <f64>i32At(g.start, g.n) * ENTRY_COST + s.spent;
  s.spent = 0;
  if (++d.pass < TRIES) return;
  restoreLabels(s, g, saved);
  ascend(d);
}

/** Takes labels u8[n] over as the separator. */
function restoreLabels(s: Separator, g: Level, labels: usize): void {
  memory.copy(s.label, labels, g.n);
  memory.fill(s.weights, 0, 12);
  s.count = 0;
  for (let v = 0; v < g.n; ++v) {
    const side = <i32>load<u8>(s.label + v);
    setI32(s.weights, side, i32At(s.weights, side) + i32At(g.weight, v));
    if (side == 2) setI32(s.vertices, s.count++, v);
  }
}

/** Goes on to the finer graph, or past the finest one. */
function ascend(d: Dissection): void {
  const s = d.separator;
  if (d.level == d.middle) {
    if (score(s) < d.bestScore) {
      d.bestScore = score(s);
      memory.copy(d.bestLabel, s.label, d.level.n);
    }
    if (--d.tries > 0) { beginMatch(d); return; }
    restoreLabels(s, d.level, d.bestLabel);
    d.middle = changetype<Level>(0);
  }
  d.cursor = 0;
  if (changetype<usize>(d.level.finer)) {
    d.level = d.level.finer;
    d.separator.count = 0;
    d.phase = PROJECT;
  } else if (d.fromLevel) {
    if (score(s) >= d.bestScore) restoreLabels(s, d.level, d.bestLabel);
    d.phase = SPLIT;
  } else if (d.level.n > TRY_LEVELS) {
    d.bestScore = score(s);
    memory.copy(d.bestLabel, s.label, d.level.n);
    d.fromLevel = true;
    d.pass = 0;
    beginSearch(d.search, d.level, 0);
    d.phase = BREADTH;
  } else d.phase = SPLIT;
}

/** Searches on: from vertex 0, from the vertex met last, and from the one met last then, which lies far out. */
function stepBreadth(d: Dissection): void {
  const g = d.level, search = d.search, before = search.done;
  const complete = searchSome(search, g, CHUNK);
  d.spent += <f64>(search.done - before) * (VERTEX_COST + ENTRY_COST * <f64>i32At(g.start, g.n) / <f64>g.n);
  if (!complete) return;
  if (++d.pass < 3) { beginSearch(search, g, i32At(search.queue, g.n - 1)); return; }
  levelSeparator(d.separator, g, search);
  d.phase = REFINE;
  d.pass = 0;
  d.idle = 0;
}

/** Gives some more vertices the labels of the pairs that hold them. */
function stepProject(d: Dissection): void {
  const g = d.level, s = d.separator, to = min(d.cursor + CHUNK, g.n);
  for (let v = d.cursor; v < to; ++v) {
    const side = load<u8>(s.label + i32At(g.coarseOf, v));
    store<u8>(s.spare + v, side);
    if (side == 2) setI32(s.vertices, s.count++, v);
  }
  d.spent += VERTEX_COST * <f64>(to - d.cursor);
  d.cursor = to;
  if (to < g.n) return;
  const swap = s.label;
  s.label = s.spare;
  s.spare = swap;
  const coarse = g.coarser;
  g.coarser = changetype<Level>(0);
  releaseLevel(coarse);
  release(g.coarseOf);
  g.coarseOf = 0;
  d.phase = REFINE;
  d.pass = 0;
  d.idle = 0;
}

function stepRefine(d: Dissection): void {
  const s = d.separator;
  if (d.pass == 0) d.cursor = i32At(s.weights, 0) > i32At(s.weights, 1) ? 1 : 0;
  d.idle = refineTowards(s, d.level, d.cursor) ? 0 : d.idle + 1;
  d.cursor = 1 - d.cursor;
  d.spent += s.spent;
  s.spent = 0;
  if (++d.pass < PASSES && d.idle < 2) return;
  ascend(d);
}

/** Writes the separator's class and numbers the vertices of the sides, unless nothing is cut off. */
function split(d: Dissection): void {
  const g = d.level, s = d.separator, label = s.label, left = <f64>(levelsOf(d.n) - g.depth);
  let size0 = 0, size1 = 0;
  for (let v = 0; v < g.n; ++v) {
    const side = <i32>load<u8>(label + v), second = i32(side == 1);
    setI32(d.place, v, second ? size1 : size0);
    size0 += i32(side == 0);
    size1 += second;
  }
  d.spent += VERTEX_COST * <f64>g.n;
  if (size0 == 0 || size1 == 0) { endPiece(d, <f64>g.n * left); return; }
  for (let k = 0; k < s.count; ++k) {
    const v = i32At(s.vertices, k);
    setI32(d.classes, g.vertexOf ? i32At(g.vertexOf, v) : v, LEVELS - g.depth);
  }
  // What will not be cut any more is done with.
  let done = <f64>g.n + <f64>s.count * (left - 1);
  if (!worthCutting(size0, g.depth + 1)) { done += <f64>size0 * (left - 1); size0 = 0; }
  if (!worthCutting(size1, g.depth + 1)) { done += <f64>size1 * (left - 1); size1 = 0; }
  d.size0 = size0;
  d.size1 = size1;
  d.cutVertices += done;
  d.side = -1;
  d.phase = EXTRACT;
}

function endPiece(d: Dissection, done: f64): void {
  d.cutVertices += done;
  releaseLadder(d);
  d.phase = NEXT;
}

/** Copies some more of a side into its own piece, which is the first of the chain; then the next side. */
function stepExtract(d: Dissection): bool {
  const g = d.level, at = d.at;
  if (d.side < 0 || at.fine == g.n) {
    if (d.side >= 0 && !closePiece(d)) return false;
    ++d.side;
    if (d.side == 0 && d.size0 == 0) ++d.side;
    if (d.side == 1 && d.size1 == 0) ++d.side;
    if (d.side == 2) { endPiece(d, 0); return true; }
    return openPiece(d, d.side == 0 ? d.size0 : d.size1);
  }
  const side = d.side, label = d.separator.label, entries = d.entriesA, piece = d.pieces, to = min(at.fine + CHUNK, g.n);
  let k = at.coarse, m = at.entries;
  for (let v = at.fine; v < to; ++v) {
    if (<i32>load<u8>(label + v) != side) continue;
    setI32(piece.start, k, m);
    setI32(piece.weight, k, i32At(g.weight, v));
    setI32(piece.vertexOf, k, g.vertexOf ? i32At(g.vertexOf, v) : v);
    for (let p = i32At(g.start, v), end = i32At(g.start, v + 1); p < end; ++p) {
      const u = i32At(g.adjacent, p);
      if (<i32>load<u8>(label + u) == side) setI32(entries, m++, i32At(d.place, u));
    }
    ++k;
  }
  d.spent += 2 * VERTEX_COST * <f64>(to - at.fine) + ENTRY_COST * <f64>(m - at.entries);
  at.fine = to;
  at.coarse = k;
  at.entries = m;
  return true;
}

function openPiece(d: Dissection, n: i32): bool {
  const piece = newLevel();
  if (!piece) return false;
  piece.next = d.pieces;
  d.pieces = piece;
  piece.n = n;
  piece.depth = d.level.depth + 1;
  piece.total = i32At(d.separator.weights, d.side);
  piece.start = allocateArray(<f64>n + 1, 2);
  piece.weight = allocateArray(<f64>n + 1, 2);
  piece.vertexOf = allocateArray(<f64>n + 1, 2);
  d.at.fine = 0;
  d.at.coarse = 0;
  d.at.entries = 0;
  return piece.start && piece.weight && piece.vertexOf;
}

function closePiece(d: Dissection): bool {
  const piece = d.pieces, m = d.at.entries;
  setI32(piece.start, piece.n, m);
  piece.adjacent = allocateArray(<f64>m + 1, 2);
  if (!piece.adjacent) return false;
  memory.copy(piece.adjacent, d.entriesA, <usize>m << 2);
  return true;
}
