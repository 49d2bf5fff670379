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
import { Bisection, FOUND, beginBisection, newBisection, releaseBisection, releaseLadder, stepBisection } from "./bisection";
import { Level, newLevel, releaseLevel } from "./coarsen";

/** Levels of separators: 7 instead of 5 took 4 % off the flops of nets and patrols of 100 000 states, 9 % off a grid of 10⁶; 9 nothing
 *  more. */
const LEVELS = 7;
/** Parts of no more vertices are left to minimum degree. */
const LEAF = 300;
/** Budget units (about 1 ns each) that a level of separators costs for each entry of the graph: 80 to 240 over nets, patrols, spirals,
 *  landmarks and grids of 10⁴ to 10⁶ vertices. */
const LEVEL_COST: f64 = 130;
/** The same for a vertex and an entry looked at once. */
const VERTEX_COST: f64 = 4;
const ENTRY_COST: f64 = 5;
/** Vertices handled before the budget is looked at. */
const CHUNK = 8192;

const NEXT = 0;
const BISECT = 1;
const EXTRACT = 2;
const DONE = 3;

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
  pieces: Level; // to be cut, chained
  bisection: Bisection;
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
  d.classes = allocateArray(<f64>n + 1, 2);
  const bisection = newBisection(n, entries), root = newLevel();
  if (bisection) d.bisection = bisection;
  if (root) d.pieces = root;
  if (!d.classes || !bisection || !root) { dissectionRelease(d); return null; }
  root.n = n;
  root.start = graph.start;
  root.adjacent = graph.adjacent;
  root.weight = graph.weight;
  root.borrowed = true;
  for (let v = 0; v < n; ++v) root.total += i32At(graph.weight, v);
  memory.fill(d.classes, 0, <usize>n << 2);
  d.allVertices = <f64>n * <f64>levelsOf(n);
  return d;
}

export function dissectionRelease(d: Dissection): void {
  for (let piece = d.pieces; changetype<usize>(piece);) {
    const next = piece.next;
    releaseLevel(piece);
    piece = next;
  }
  if (changetype<usize>(d.bisection)) releaseBisection(d.bisection);
  release(d.classes);
  release(changetype<usize>(d));
}

/** Works for about `budget` units (about 1 ns each). OK, RUNNING or OUT_OF_MEMORY. */
export function dissectionAdvance(d: Dissection, budget: f64): i32 {
  const stop = d.spent + budget;
  while (d.phase != DONE) {
    if (d.spent >= stop) return RUNNING;
    let fits = true;
    if (d.phase == NEXT) nextPiece(d);
    else if (d.phase == EXTRACT) fits = stepExtract(d);
    else if (d.bisection.phase == FOUND) split(d);
    else {
      const before = d.bisection.spent;
      fits = stepBisection(d.bisection);
      d.spent += d.bisection.spent - before;
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
  if (changetype<usize>(d.bisection.level)) {
    let piece = d.bisection.level;
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
  d.pieceBegan = d.spent;
  d.phase = BISECT;
  beginBisection(d.bisection, piece);
}

/** Writes the separator's class and numbers the vertices of the sides, unless nothing is cut off. */
function split(d: Dissection): void {
  const g = d.bisection.level, s = d.bisection.separator, label = s.label, place = d.bisection.place, left = <f64>(levelsOf(d.n) - g.depth);
  let size0 = 0, size1 = 0;
  for (let v = 0; v < g.n; ++v) {
    const side = <i32>load<u8>(label + v), second = i32(side == 1);
    setI32(place, v, second ? size1 : size0);
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
  releaseLadder(d.bisection);
  d.phase = NEXT;
}

/** Copies some more of a side into its own piece, which is the first of the chain; then the next side. */
function stepExtract(d: Dissection): bool {
  const b = d.bisection, g = b.level, at = b.at;
  if (d.side < 0 || at.fine == g.n) {
    if (d.side >= 0 && !closePiece(d)) return false;
    ++d.side;
    if (d.side == 0 && d.size0 == 0) ++d.side;
    if (d.side == 1 && d.size1 == 0) ++d.side;
    if (d.side == 2) { endPiece(d, 0); return true; }
    return openPiece(d, d.side == 0 ? d.size0 : d.size1);
  }
  const side = d.side, label = b.separator.label, entries = b.entriesA, piece = d.pieces, to = min(at.fine + CHUNK, g.n);
  let k = at.coarse, m = at.entries;
  for (let v = at.fine; v < to; ++v) {
    if (<i32>load<u8>(label + v) != side) continue;
    setI32(piece.start, k, m);
    setI32(piece.weight, k, i32At(g.weight, v));
    setI32(piece.vertexOf, k, g.vertexOf ? i32At(g.vertexOf, v) : v);
    for (let p = i32At(g.start, v), end = i32At(g.start, v + 1); p < end; ++p) {
      const u = i32At(g.adjacent, p);
      if (<i32>load<u8>(label + u) == side) setI32(entries, m++, i32At(b.place, u));
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
  piece.depth = d.bisection.level.depth + 1;
  piece.total = i32At(d.bisection.separator.weights, d.side);
  piece.start = allocateArray(<f64>n + 1, 2);
  piece.weight = allocateArray(<f64>n + 1, 2);
  piece.vertexOf = allocateArray(<f64>n + 1, 2);
  d.bisection.at.fine = 0;
  d.bisection.at.coarse = 0;
  d.bisection.at.entries = 0;
  return piece.start && piece.weight && piece.vertexOf;
}

function closePiece(d: Dissection): bool {
  const piece = d.pieces, m = d.bisection.at.entries;
  setI32(piece.start, piece.n, m);
  piece.adjacent = allocateArray(<f64>m + 1, 2);
  if (!piece.adjacent) return false;
  memory.copy(piece.adjacent, d.bisection.entriesA, <usize>m << 2);
  return true;
}
