/** One level of coarsening: neighbours joined in pairs along heavy edges, and the graph of pairs.
 *  Vertices are visited in scattered order: in the order of their numbers, a grid would be matched row by row and its separators
 *  would come out ragged. Scattering within a window keeps what is read together near together.
 *  Source: Karypis, Kumar, "A fast and high quality multilevel scheme for partitioning irregular graphs", SIAM J. Sci. Comput. 20
 *  (1998) (heavy-edge matching). */
import { allocateArray, release } from "../memory/heap";
import { addI32, i32At, setI32 } from "../memory/access";

/** Vertices visited in scattered order before the next ones are, a power of two. */
const WINDOW = 4096;
/** Step through a window: odd, near the golden section of it, so that successive visits lie far apart. */
const STRIDE = 2531;
/** Budget units (about 1 ns each) for a vertex and an entry, of matching and contraction together. */
const VERTEX_COST: f64 = 12;
const ENTRY_COST: f64 = 9;

/** A graph in a ladder of ever coarser ones. */
@unmanaged
export class Level {
  n: i32;
  /** Σ weight. */
  total: i32;
  start: usize;
  adjacent: usize;
  weight: usize;
  /** i32 an entry: edges of the finest graph that this edge stands for; 0 when every edge stands for itself. */
  edgeWeight: usize;
  /** i32[n]: the vertex of the coarser graph that holds each; there once `coarser` is. */
  coarseOf: usize;
  finer: Level;
  coarser: Level;
  /** Of a piece to dissect: i32[n] vertices of the whole graph, 0 when they are the same; cuts above it; the next piece to do. */
  vertexOf: usize;
  depth: i32;
  next: Level;
  /** start, adjacent and weight belong to the caller's graph. */
  borrowed: bool;
}

export function newLevel(): Level | null {
  const level = changetype<Level>(allocateArray(<f64>offsetof<Level>(), 0));
  if (changetype<usize>(level)) memory.fill(changetype<usize>(level), 0, offsetof<Level>());
  return level;
}

export function releaseLevel(level: Level): void {
  if (!level.borrowed) {
    release(level.start);
    release(level.adjacent);
    release(level.weight);
  }
  release(level.edgeWeight);
  release(level.coarseOf);
  release(level.vertexOf);
  release(changetype<usize>(level));
}

/** The window for a graph of n vertices, as a mask. */
// @ts-ignore: decorator
@inline function windowMask(n: i32): i32 { return n >= WINDOW ? WINDOW - 1 : (1 << (32 - clz(n))) - 1; }

/** Visits `matchSome` takes for n vertices: whole windows. */
export function visitsOf(n: i32): i32 {
  const mask = windowMask(n);
  return (n + mask) & ~mask;
}

/** Matches the vertices of visits from … to − 1; mate i32[n] starts at −1 and ends with the partner, itself for none. A pair may not
 *  weigh more than `heaviest`; `turn` varies the order of visits. Gives the work done. */
export function matchSome(level: Level, mate: usize, heaviest: i32, turn: i32, from: i32, to: i32): f64 {
  const n = level.n, start = level.start, adjacent = level.adjacent, weight = level.weight, edgeWeight = level.edgeWeight;
  const mask = windowMask(n);
  let entries = 0;
  for (let visit = from; visit < to; ++visit) {
    const v = (visit & ~mask) | ((visit * STRIDE ^ turn) & mask);
    if (v >= n || i32At(mate, v) >= 0) continue;
    const room = heaviest - i32At(weight, v), p0 = i32At(start, v), end = i32At(start, v + 1);
    let best = v, bestEdge = 0, bestWeight = 0;
    for (let p = p0; p < end; ++p) {
      const u = i32At(adjacent, p);
      if (i32At(mate, u) >= 0) continue;
      const w = i32At(weight, u), edge = edgeWeight ? i32At(edgeWeight, p) : 1;
      if (w > room) continue;
      if (edge > bestEdge || (edge == bestEdge && w < bestWeight)) { best = u; bestEdge = edge; bestWeight = w; }
    }
    entries += end - p0;
    setI32(mate, v, best);
    setI32(mate, best, v);
  }
  return <f64>(to - from) * VERTEX_COST + <f64>entries * ENTRY_COST * 0.4;
}

/** Opens the coarser graph once all are matched: numbers the pairs in the order of their first vertices, so that what was near stays
 *  near. Null when memory runs out. */
export function openCoarser(level: Level, mate: usize): Level | null {
  const n = level.n;
  level.coarseOf = allocateArray(<f64>n + 1, 2);
  if (!level.coarseOf) return null;
  let pairs = 0;
  for (let v = 0; v < n; ++v) {
    const u = i32At(mate, v);
    if (u < v) continue;
    setI32(level.coarseOf, v, pairs);
    setI32(level.coarseOf, u, pairs);
    ++pairs;
  }
  const coarse = newLevel();
  if (!coarse) return null;
  coarse.n = pairs;
  coarse.total = level.total;
  coarse.start = allocateArray(<f64>pairs + 1, 2);
  coarse.weight = allocateArray(<f64>pairs + 1, 2);
  if (!coarse.start || !coarse.weight) { releaseLevel(coarse); return null; }
  setI32(coarse.start, 0, 0);
  return coarse;
}

/** Where a sliced contraction stands. */
@unmanaged
export class Contraction {
  fine: i32; // the next vertex of the finer graph
  coarse: i32; // the next pair
  entries: i32; // written so far
}

/** Contracts pairs until about `budget` units of work are done; entries go to adjacent and edgeWeight, as long as the finer graph's.
 *  place i32[pairs] holds −1 at the start. Gives the work done. */
export function contractSome(level: Level, coarse: Level, mate: usize, at: Contraction, place: usize, adjacent: usize, edgeWeight: usize, budget: f64): f64 {
  const n = level.n, start = level.start, coarseOf = level.coarseOf;
  let v = at.fine, c = at.coarse, m = at.entries, work: f64 = 0;
  for (; v < n && work < budget; ++v) {
    const u = i32At(mate, v);
    if (u < v) continue;
    const first = m;
    setI32(place, c, first); // stands in for a loop, which is dropped
    let w = i32At(level.weight, v);
    for (let x = v;;) {
      const end = i32At(start, x + 1);
      work += VERTEX_COST + <f64>(end - i32At(start, x)) * ENTRY_COST;
      for (let p = i32At(start, x); p < end; ++p) {
        const d = i32At(coarseOf, i32At(level.adjacent, p)), edge = level.edgeWeight ? i32At(level.edgeWeight, p) : 1;
        if (d == c) continue;
        const known = i32At(place, d);
        if (known >= first) addI32(edgeWeight, known, edge);
        else {
          setI32(place, d, m);
          setI32(adjacent, m, d);
          setI32(edgeWeight, m, edge);
          ++m;
        }
      }
      if (x == u) break;
      x = u;
      w += i32At(level.weight, u);
    }
    setI32(coarse.weight, c, w);
    setI32(coarse.start, ++c, m);
  }
  at.fine = v;
  at.coarse = c;
  at.entries = m;
  return work;
}

/** Copies the entries into the coarse graph's own memory. False when memory runs out. */
export function closeCoarser(coarse: Level, entries: i32, adjacent: usize, edgeWeight: usize): bool {
  coarse.adjacent = allocateArray(<f64>entries + 1, 2);
  coarse.edgeWeight = allocateArray(<f64>entries + 1, 2);
  if (!coarse.adjacent || !coarse.edgeWeight) return false;
  memory.copy(coarse.adjacent, adjacent, <usize>entries << 2);
  memory.copy(coarse.edgeWeight, edgeWeight, <usize>entries << 2);
  return true;
}
