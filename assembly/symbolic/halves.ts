/** The graph under an elimination order, cut into earlier and later neighbours of each step.
 *  Everything that analyses a factor reads one of the two halves, so the permutation is paid once. */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { Graph } from "../ordering/graph";

@unmanaged
export class Halves {
  /** Elimination steps (vertices). */
  n: i32;
  /** i32[n + 1] and i32[m]: neighbours of step k that are eliminated before it (the row structure of A's lower triangle). */
  earlierStart: usize;
  earlier: usize;
  /** i32[n + 1] and i32[m]: those eliminated after it (the column structure). */
  laterStart: usize;
  later: usize;
}

/** Halves of `graph` eliminated in `order` (order[k] = vertex of step k, place its inverse), or null when memory runs out.
 *  Lists are in no particular order. Cost: one read of each adjacency entry. */
export function permuteGraph(graph: Graph, order: usize, place: usize): Halves | null {
  const n = graph.n;
  const edges = i32At(graph.start, n) >> 1;
  const address = allocateArray(1, 5);
  if (!address) return null;
  const h = changetype<Halves>(address);
  h.n = n;
  // One spare entry each: the branch-free fill below writes to both halves and advances one.
  h.earlierStart = allocateArray(<f64>n + 1, 2);
  h.earlier = allocateArray(<f64>edges + 1, 2);
  h.laterStart = allocateArray(<f64>n + 1, 2);
  h.later = allocateArray(<f64>edges + 1, 2);
  if (!h.earlierStart || !h.earlier || !h.laterStart || !h.later) { releaseHalves(h); return null; }
  const start = graph.start, adjacent = graph.adjacent;
  let e = 0, l = 0;
  for (let k = 0; k < n; ++k) {
    setI32(h.earlierStart, k, e);
    setI32(h.laterStart, k, l);
    const v = i32At(order, k);
    for (let p = i32At(start, v), end = i32At(start, v + 1); p < end; ++p) {
      const i = i32At(place, i32At(adjacent, p));
      setI32(h.earlier, e, i);
      setI32(h.later, l, i);
      const isEarlier = i32(i < k);
      e += isEarlier;
      l += 1 - isEarlier;
    }
  }
  setI32(h.earlierStart, n, e);
  setI32(h.laterStart, n, l);
  assert(e == edges && l == edges, "the graph is not symmetric");
  return h;
}

export function releaseHalves(h: Halves): void {
  release(h.earlierStart);
  release(h.earlier);
  release(h.laterStart);
  release(h.later);
  release(changetype<usize>(h));
}
