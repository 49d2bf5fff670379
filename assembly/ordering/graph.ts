/** The graph of states: vertex v is a block of `weight[v]` unknowns that share one sparsity pattern, an edge a nonzero block.
 *  Symmetric, without loops, neighbours ascending. */
@unmanaged
export class Graph {
  /** Number of vertices. */
  n: i32;
  /** i32[n + 1]: neighbours of v are adjacent[start[v]] … adjacent[start[v + 1] − 1]. */
  start: usize;
  /** i32[start[n]]. */
  adjacent: usize;
  /** i32[n]: unknowns of each vertex, at least 1. */
  weight: usize;
}
