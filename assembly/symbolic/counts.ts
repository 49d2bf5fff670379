/** Column counts of the Cholesky factor from the graph alone, in nearly linear time, with each row counted by its weight.
 *  Row i of L is a subtree of the elimination tree rooted at i; a column's count sums the weights of the rows whose subtrees
 *  hold it. Each row subtree is told by its leaves and the least common ancestors of neighbouring leaves.
 *  Source: Gilbert, Ng, Peyton, "An efficient algorithm to compute row and column counts for sparse Cholesky factorization",
 *  SIAM J. Matrix Anal. Appl. 15 (1994). */
import { addI32, i32At, setI32 } from "../memory/access";

/** Fills count i32[n]: unknowns in block column j of L, its own included.
 *  parent, post: the tree and its postorder; laterStart, later: the column structure of A; weight i32[n]: unknowns of step k
 *  (already permuted). `scratch` is i32[4 n].  Cost: nearly linear in the edges. */
export function columnCounts(n: i32, parent: usize, post: usize, laterStart: usize, later: usize, weight: usize, count: usize, scratch: usize): void {
  const first = scratch; // postorder number of the first descendant
  const highest = scratch + (<usize>n << 2); // largest `first` among the columns of row i seen so far: larger means a new leaf
  const leaf = highest + (<usize>n << 2); // the leaf of row i seen last
  const set = leaf + (<usize>n << 2); // disjoint sets of finished subtrees, to find least common ancestors
  for (let j = 0; j < n; ++j) { setI32(first, j, -1); setI32(highest, j, -1); setI32(leaf, j, -1); setI32(set, j, j); }
  for (let t = 0; t < n; ++t) {
    let j = i32At(post, t);
    setI32(count, j, i32At(first, j) < 0 ? i32At(weight, j) : 0); // a leaf of the tree is a leaf of its own row subtree
    for (; j >= 0 && i32At(first, j) < 0; j = i32At(parent, j)) setI32(first, j, t);
  }
  for (let t = 0; t < n; ++t) {
    const j = i32At(post, t), up = i32At(parent, j), firstOfJ = i32At(first, j);
    if (up >= 0) addI32(count, up, -i32At(weight, j)); // row j's subtree ends at j
    for (let p = i32At(laterStart, j), end = i32At(laterStart, j + 1); p < end; ++p) {
      const i = i32At(later, p);
      if (firstOfJ <= i32At(highest, i)) continue; // j is inside the subtree of a leaf already counted
      setI32(highest, i, firstOfJ);
      addI32(count, j, i32At(weight, i));
      const previous = i32At(leaf, i);
      setI32(leaf, i, j);
      if (previous < 0) continue;
      let q = previous; // least common ancestor of the two leaves: the root of previous's set
      while (i32At(set, q) != q) q = i32At(set, q);
      for (let s = previous; s != q;) { const next = i32At(set, s); setI32(set, s, q); s = next; }
      addI32(count, q, -i32At(weight, i));
    }
    if (up >= 0) setI32(set, j, up);
  }
  for (let t = 0; t < n; ++t) {
    const j = i32At(post, t), up = i32At(parent, j);
    if (up >= 0) addI32(count, up, i32At(count, j));
  }
}
