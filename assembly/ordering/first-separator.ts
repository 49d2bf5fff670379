/** First separators, to be refined: regions grown from scattered vertices (on the coarsest graph), and the best level of a
 *  breadth-first search from a vertex far out (on the finest one).
 *  Sources: Karypis, Kumar (1998), section on greedy graph growing; George, "Nested dissection of a regular finite element mesh",
 *  SIAM J. Numer. Anal. 10 (1973), and George, Liu (1981), ch. 8 (level structures). */
import { i32At, setI32 } from "../memory/access";
import { Level } from "./coarsen";
import { Separator } from "./separator";

/** A breadth-first search that can stop anywhere and go on. */
@unmanaged
export class Search {
  /** i32[n]: vertices in the order they are met, `met` so far, the first `done` of them followed up. */
  queue: usize;
  met: i32;
  done: i32;
  /** i32[n]: level of each vertex, −1 before it is met. */
  distance: usize;
  /** No vertex below this number is unmet, once a component is used up. */
  unmet: i32;
}

export function beginSearch(search: Search, g: Level, root: i32): void {
  memory.fill(search.distance, 0xff, <usize>g.n << 2);
  setI32(search.distance, root, 0);
  setI32(search.queue, 0, root);
  search.met = 1;
  search.done = 0;
  search.unmet = 0;
}

/** Follows up to `most` vertices more. Another component goes on one level beyond. True when all are done. Requires n > 0. */
export function searchSome(search: Search, g: Level, most: i32): bool {
  const n = g.n, start = g.start, adjacent = g.adjacent, queue = search.queue, distance = search.distance;
  let done = search.done, met = search.met;
  for (const stop = min(n, done + most); done < stop; ++done) {
    if (done == met) {
      while (i32At(distance, search.unmet) >= 0) ++search.unmet;
      setI32(distance, search.unmet, i32At(distance, i32At(queue, met - 1)) + 1);
      setI32(queue, met++, search.unmet);
    }
    const v = i32At(queue, done), next = i32At(distance, v) + 1;
    for (let p = i32At(start, v), end = i32At(start, v + 1); p < end; ++p) {
      const u = i32At(adjacent, p);
      if (i32At(distance, u) >= 0) continue;
      setI32(distance, u, next);
      setI32(queue, met++, u);
    }
  }
  search.done = done;
  search.met = met;
  return done == n;
}

/** Labels the region that breadth-first growth from `root` has reached at half the weight 0, its outer rim 2, the rest 1. */
export function growRegion(s: Separator, g: Level, root: i32, search: Search): void {
  const queue = search.queue;
  beginSearch(search, g, root);
  searchSome(search, g, g.n);
  memory.fill(s.label, 1, g.n);
  let weight = 0, k = 0;
  for (; k < g.n; ++k) {
    const v = i32At(queue, k), w = i32At(g.weight, v);
    if (2 * weight + w > g.total) break;
    weight += w;
    store<u8>(s.label + v, 0);
  }
  let inside = 0;
  s.count = 0;
  for (let q = 0; q < k; ++q) {
    const v = i32At(queue, q);
    for (let p = i32At(g.start, v), end = i32At(g.start, v + 1); p < end; ++p) {
      const u = i32At(g.adjacent, p);
      if (load<u8>(s.label + u) != 1) continue;
      store<u8>(s.label + u, 2);
      setI32(s.vertices, s.count++, u);
      inside += i32At(g.weight, u);
    }
  }
  setI32(s.weights, 0, weight);
  setI32(s.weights, 1, g.total - weight - inside);
  setI32(s.weights, 2, inside);
}

/** Labels the lightest level of a finished search between sides within the limit 2, what lies before it 0, after it 1; of no such
 *  level, the one that holds the middle. */
export function levelSeparator(s: Separator, g: Level, search: Search): void {
  const n = g.n, half = g.total >> 1, queue = search.queue, distance = search.distance;
  let before = 0, best = -1, bestWeight = 0, bestBefore = 0;
  for (let k = 0; k < n;) {
    const level = i32At(distance, i32At(queue, k));
    let weight = 0;
    for (; k < n && i32At(distance, i32At(queue, k)) == level; ++k) weight += i32At(g.weight, i32At(queue, k));
    const after = g.total - before - weight;
    const fits = before <= s.limit && after <= s.limit;
    if ((fits && (best < 0 || weight < bestWeight)) || (best < 0 && before + weight > half && !fits)) {
      best = level;
      bestWeight = weight;
      bestBefore = before;
    }
    before += weight;
  }
  s.count = 0;
  for (let v = 0; v < n; ++v) {
    const d = i32At(distance, v);
    store<u8>(s.label + v, d < best ? 0 : d > best ? 1 : 2);
    if (d == best) setI32(s.vertices, s.count++, v);
  }
  setI32(s.weights, 0, bestBefore);
  setI32(s.weights, 1, g.total - bestBefore - bestWeight);
  setI32(s.weights, 2, bestWeight);
}
