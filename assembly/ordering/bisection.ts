/** Bisects a graph by a vertex separator: coarsens it, cuts the coarsest graph, refines on the way back; a large one tries a level of a
 *  breadth-first search as well.
 *  Sources: Karypis, Kumar (1998); George (1973); see coarsen.ts, first-separator.ts and separator.ts. */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { Contraction, Level, closeCoarser, contractSome, matchSome, openCoarser, releaseLevel, visitsOf } from "./coarsen";
import { Search, beginSearch, growRegion, levelSeparator, searchSome } from "./first-separator";
import { Separator, newSeparator, refine, refineTowards, releaseSeparator, score } from "./separator";

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
/** Budget units (about 1 ns each) for a vertex and an entry looked at once, and for a vertex of a region to grow. */
const VERTEX_COST: f64 = 4;
const ENTRY_COST: f64 = 5;
const GROW_COST: f64 = 30;
/** Vertices handled in a step. */
const CHUNK = 8192;

const MATCH = 0;
const CONTRACT = 1;
const GROW = 2;
const PROJECT = 3;
const REFINE = 4;
const BREADTH = 5;
export const FOUND = 6;

@unmanaged
export class Bisection {
  /** FOUND once the separator is there. */
  phase: i32;
  cursor: i32;
  spent: f64;
  /** The rung of the ladder at hand; the graph itself at the start and once the separator is found. */
  level: Level;
  coarse: Level; // being built
  at: Contraction;
  separator: Separator;
  search: Search;
  random: u32;
  // Workspaces, i32[n] and i32[entries], free between bisections.
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
}

/** Room to bisect graphs of up to n vertices and so many entries, one after another. Null: no memory. */
export function newBisection(n: i32, entries: i32): Bisection | null {
  const d = changetype<Bisection>(allocateArray(<f64>offsetof<Bisection>(), 0));
  if (!changetype<usize>(d)) return null;
  memory.fill(changetype<usize>(d), 0, offsetof<Bisection>());
  d.phase = FOUND;
  d.random = 2463534242;
  d.at = changetype<Contraction>(allocateArray(<f64>offsetof<Contraction>(), 0));
  d.search = changetype<Search>(allocateArray(<f64>offsetof<Search>(), 0));
  d.mate = allocateArray(<f64>n + 1, 2);
  d.place = allocateArray(<f64>n + 1, 2);
  d.bestLabel = allocateArray(<f64>n + 1, 0);
  d.entriesA = allocateArray(<f64>entries + 1, 2);
  d.entriesB = allocateArray(<f64>entries + 1, 2);
  const separator = newSeparator(n);
  if (separator) d.separator = separator;
  if (!changetype<usize>(d.at) || !changetype<usize>(d.search) || !d.mate || !d.place || !d.bestLabel || !d.entriesA || !d.entriesB || !separator) {
    releaseBisection(d);
    return null;
  }
  d.search.queue = d.mate; // matching and searching never overlap
  d.search.distance = d.place;
  return d;
}

export function releaseBisection(d: Bisection): void {
  releaseLadder(d);
  if (changetype<usize>(d.coarse)) releaseLevel(d.coarse);
  if (changetype<usize>(d.separator)) releaseSeparator(d.separator);
  release(changetype<usize>(d.at));
  release(changetype<usize>(d.search));
  release(d.mate);
  release(d.place);
  release(d.entriesA);
  release(d.entriesB);
  release(d.bestLabel);
  release(changetype<usize>(d));
}

/** Starts to bisect `graph`, which the bisection owns from now on. */
export function beginBisection(d: Bisection, graph: Level): void {
  d.level = graph;
  d.middle = changetype<Level>(0);
  d.fromLevel = false;
  d.separator.limit = <i32>(LARGEST_SIDE * <f64>graph.total);
  beginMatch(d);
}

/** One step, some 0.1 ms at most on sparse graphs. False when memory runs out. */
export function stepBisection(d: Bisection): bool {
  switch (d.phase) {
    case MATCH: return stepMatch(d);
    case CONTRACT: return stepContract(d);
    case GROW: grow(d); return true;
    case PROJECT: stepProject(d); return true;
    case REFINE: stepRefine(d); return true;
    default: stepBreadth(d); return true;
  }
}

/** Gives back the ladder of the piece at hand, piece included. */
export function releaseLadder(d: Bisection): void {
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

function beginMatch(d: Bisection): void {
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

function stepMatch(d: Bisection): bool {
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

function stepContract(d: Bisection): bool {
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
function below(d: Bisection, n: i32): i32 {
  let x = d.random;
  x ^= x << 13;
  x ^= x >> 17;
  x ^= x << 5;
  d.random = x;
  return <i32>((<u64>x * <u64>n) >> 32);
}

function beginGrow(d: Bisection): void {
  d.phase = GROW;
  d.pass = 0;
  d.growScore = Infinity;
}

/** Cuts the coarsest graph: one more region, refined; the best goes on. */
function grow(d: Bisection): void {
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
function ascend(d: Bisection): void {
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
    d.phase = FOUND;
  } else if (d.level.n > TRY_LEVELS) {
    d.bestScore = score(s);
    memory.copy(d.bestLabel, s.label, d.level.n);
    d.fromLevel = true;
    d.pass = 0;
    beginSearch(d.search, d.level, 0);
    d.phase = BREADTH;
  } else d.phase = FOUND;
}

/** Searches on: from vertex 0, from the vertex met last, and from the one met last then, which lies far out. */
function stepBreadth(d: Bisection): void {
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
function stepProject(d: Bisection): void {
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

function stepRefine(d: Bisection): void {
  const s = d.separator;
  if (d.pass == 0) d.cursor = i32At(s.weights, 0) > i32At(s.weights, 1) ? 1 : 0;
  d.idle = refineTowards(s, d.level, d.cursor) ? 0 : d.idle + 1;
  d.cursor = 1 - d.cursor;
  d.spent += s.spent;
  s.spent = 0;
  if (++d.pass < PASSES && d.idle < 2) return;
  ascend(d);
}
