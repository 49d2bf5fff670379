/** A vertex separator and its refinement from one side at a time.
 *  Labels: 0 and 1 are the sides, 2 the separator; no edge joins the sides. Moving v out of the separator to a side pulls its
 *  neighbours on the other side in: gain = weight(v) − Σ weight(pulled). A pass moves the vertex of best gain towards one side,
 *  again and again, uphill too, and goes back to the best separator it met; passes alternate between the sides. One-sided passes
 *  never move a vertex twice; letting both sides move at once was seen to thrash.
 *  Source: Fiduccia, Mattheyses, "A linear-time heuristic for improving network partitions", Proc. 19th Design Automation Conference
 *  (1982), applied to the separator itself (Ashcraft, Liu, "Applications of the Dulmage–Mendelsohn decomposition and network
 *  flow to graph bisection improvement", SIAM J. Matrix Anal. Appl. 19 (1998)). */
import { allocateArray, release } from "../memory/heap";
import { addI32, i32At, setI32 } from "../memory/access";
import { Level } from "./coarsen";

/** A pass gives up after this many moves without a better separator, plus a share of the separator's size. */
const PATIENCE = 60;
/** Budget units (about 1 ns each) for a move and for an entry read. */
const MOVE_COST: f64 = 120;
const ENTRY_COST: f64 = 6;

@unmanaged
export class Separator {
  /** u8 a vertex of the graph at hand, and a second array to write the next labels to. */
  label: usize;
  spare: usize;
  /** The vertices labelled 2, in no order. */
  vertices: usize;
  count: i32;
  /** i32[3]: weight by label. */
  weights: usize;
  /** The most a side may weigh. */
  limit: i32;
  spent: f64;
  key: usize; // i64 a vertex, of those in the heap: gain · 2³² + when it came or changed
  clock: i32;
  heap: usize; // vertices, best gain first
  place: usize; // place in the heap, −1 for none
  heapSize: i32;
  log: usize; // moves of a pass: v, or ~u for a vertex pulled in
  arrays: usize;
}

/** Room for graphs of up to n vertices. Null: no memory. */
export function newSeparator(n: i32): Separator | null {
  const s = changetype<Separator>(allocateArray(<f64>offsetof<Separator>(), 0));
  if (!changetype<usize>(s)) return null;
  memory.fill(changetype<usize>(s), 0, offsetof<Separator>());
  const stride = <usize>n << 2;
  s.arrays = allocateArray(7 * <f64>n + 4, 2);
  s.label = allocateArray(<f64>n + 1, 0);
  s.spare = allocateArray(<f64>n + 1, 0);
  if (!s.arrays || !s.label || !s.spare) { releaseSeparator(s); return null; }
  s.weights = s.arrays;
  s.key = s.arrays + 16;
  s.vertices = s.key + 2 * stride;
  s.heap = s.vertices + stride;
  s.place = s.heap + stride;
  s.log = s.place + stride; // a vertex is moved once and pulled in once: 2 n
  memory.fill(s.place, 0xff, stride);
  return s;
}

export function releaseSeparator(s: Separator): void {
  release(s.arrays);
  release(s.label);
  release(s.spare);
  release(changetype<usize>(s));
}

/** What a separator is judged by, less is better: its weight and what a side weighs too much; equal ones by their balance. */
// @ts-ignore: decorator
@inline export function score(s: Separator): f64 {
  const a = i32At(s.weights, 0), b = i32At(s.weights, 1), inside = i32At(s.weights, 2), heavier = max(a, b);
  return <f64>(inside + max(0, heavier - s.limit)) + <f64>(heavier - min(a, b)) / <f64>(a + b + inside + 1);
}

/** Up to `passes` passes, until one from either side in a row has brought nothing. */
export function refine(s: Separator, g: Level, passes: i32): void {
  let to = i32At(s.weights, 0) > i32At(s.weights, 1) ? 1 : 0, idle = 0;
  for (let k = 0; k < passes && idle < 2; ++k, to = 1 - to) idle = refineTowards(s, g, to) ? 0 : idle + 1;
}

/** One pass that moves vertices to side `to`. True when the separator is better after it. */
export function refineTowards(s: Separator, g: Level, to: i32): bool {
  const start = g.start, adjacent = g.adjacent, weight = g.weight, label = s.label, weights = s.weights, place = s.place, log = s.log;
  const from = 1 - to;
  let entries = 0;
  s.heapSize = 0;
  s.clock = 0;
  for (let k = 0; k < s.count; ++k) {
    const v = i32At(s.vertices, k);
    let sum = i32At(weight, v);
    const end = i32At(start, v + 1);
    for (let p = i32At(start, v); p < end; ++p) {
      const u = i32At(adjacent, p);
      if (<i32>load<u8>(label + u) == from) sum -= i32At(weight, u);
    }
    entries += end - i32At(start, v);
    push(s, v, sum);
  }
  const before = score(s), patience = PATIENCE + (s.count >> 2);
  let best = before, events = 0, bestEvents = 0, idle = 0, moves = 0;
  while (s.heapSize > 0 && idle < patience) {
    const v = pop(s), w = i32At(weight, v);
    if (i32At(weights, to) + w > s.limit) continue;
    store<u8>(label + v, <u8>to);
    addI32(weights, to, w);
    addI32(weights, 2, -w);
    setI32(log, events++, v);
    ++moves;
    for (let p = i32At(start, v), end = i32At(start, v + 1); p < end; ++p) {
      const u = i32At(adjacent, p);
      if (<i32>load<u8>(label + u) != from) continue;
      const pulled = i32At(weight, u);
      store<u8>(label + u, 2);
      addI32(weights, from, -pulled);
      addI32(weights, 2, pulled);
      setI32(log, events++, ~u);
      let sum = pulled;
      const last = i32At(start, u + 1);
      for (let q = i32At(start, u); q < last; ++q) {
        const x = i32At(adjacent, q), side = <i32>load<u8>(label + x);
        if (side == from) sum -= i32At(weight, x);
        else if (side == 2 && i32At(place, x) >= 0) { // u is no longer there for x to pull
          raise(s, x, pulled);
        }
      }
      entries += last - i32At(start, u);
      push(s, u, sum);
    }
    const now = score(s);
    ++idle;
    if (now < best) { best = now; bestEvents = events; idle = 0; }
  }
  while (s.heapSize > 0) setI32(place, i32At(s.heap, --s.heapSize), -1);
  for (; events > bestEvents; --events) {
    const e = i32At(log, events - 1), v = e < 0 ? ~e : e, back = e < 0 ? from : 2, w = i32At(weight, v);
    addI32(weights, <i32>load<u8>(label + v), -w);
    addI32(weights, back, w);
    store<u8>(label + v, <u8>back);
  }
  let count = 0;
  for (let k = 0; k < s.count; ++k) {
    const v = i32At(s.vertices, k);
    if (load<u8>(label + v) == 2) setI32(s.vertices, count++, v);
  }
  for (let k = 0; k < events; ++k) {
    const u = ~i32At(log, k);
    if (u >= 0 && load<u8>(label + u) == 2) setI32(s.vertices, count++, u);
  }
  s.count = count;
  s.spent += <f64>moves * MOVE_COST + <f64>entries * ENTRY_COST;
  return best < before;
}

// A binary heap of vertices, the greatest gain at the root; of equal gains the one that came or changed last, so that a front moves on
// where it has begun to.

// @ts-ignore: decorator
@inline function keyAt(key: usize, v: i32): i64 { return load<i64>(key + (<usize>v << 3)); }

function push(s: Separator, v: i32, gain: i32): void {
  const at = s.heapSize++;
  store<i64>(s.key + (<usize>v << 3), (<i64>gain << 32) + ++s.clock);
  setI32(s.heap, at, v);
  setI32(s.place, v, at);
  rise(s, at);
}

function raise(s: Separator, v: i32, by: i32): void {
  const at = s.key + (<usize>v << 3);
  store<i64>(at, (((load<i64>(at) >> 32) + by) << 32) + ++s.clock);
  rise(s, i32At(s.place, v));
}

function rise(s: Separator, at: i32): void {
  const heap = s.heap, place = s.place, key = s.key, v = i32At(heap, at), own = keyAt(key, v);
  while (at > 0) {
    const up = (at - 1) >> 1, u = i32At(heap, up);
    if (own <= keyAt(key, u)) break;
    setI32(heap, at, u);
    setI32(place, u, at);
    at = up;
  }
  setI32(heap, at, v);
  setI32(place, v, at);
}

function pop(s: Separator): i32 {
  const heap = s.heap, place = s.place, key = s.key, top = i32At(heap, 0), size = --s.heapSize;
  setI32(place, top, -1);
  if (size == 0) return top;
  const v = i32At(heap, size), own = keyAt(key, v);
  let at = 0;
  for (;;) {
    let down = 2 * at + 1;
    if (down >= size) break;
    if (down + 1 < size && keyAt(key, i32At(heap, down + 1)) > keyAt(key, i32At(heap, down))) ++down;
    const u = i32At(heap, down);
    if (keyAt(key, u) <= own) break;
    setI32(heap, at, u);
    setI32(place, u, at);
    at = down;
  }
  setI32(heap, at, v);
  setI32(place, v, at);
  return top;
}
