/** The elimination tree and its postorder.
 *  parent[j] = the first row below the diagonal in column j of the factor, −1 for a root.
 *  Source: Liu, "The role of elimination trees in sparse factorization", SIAM J. Matrix Anal. Appl. 11 (1990). */
import { i32At, setI32 } from "../memory/access";

/** Fills parent i32[n] from the earlier half (see halves.ts). `ancestor` i32[n] is workspace.
 *  Cost: nearly linear in the edges (path compression). */
export function eliminationTree(n: i32, earlierStart: usize, earlier: usize, parent: usize, ancestor: usize): void {
  for (let k = 0; k < n; ++k) {
    setI32(parent, k, -1);
    setI32(ancestor, k, -1);
    for (let p = i32At(earlierStart, k), end = i32At(earlierStart, k + 1); p < end; ++p) {
      let i = i32At(earlier, p);
      // Climb from i to the root of its present tree, pointing everything on the way at k.
      while (i != k) {
        const next = i32At(ancestor, i);
        setI32(ancestor, i, k);
        if (next < 0) { setI32(parent, i, k); break; }
        i = next;
      }
    }
  }
}

/** Fills post i32[n]: post[t] = the node visited t-th, children before parents, siblings by ascending number, every subtree
 *  contiguous. Requires parent[j] > j. `head` and `next` are i32[n] workspaces. Cost: O(n), no recursion. */
export function postorder(n: i32, parent: usize, post: usize, head: usize, next: usize): void {
  for (let j = 0; j < n; ++j) setI32(head, j, -1);
  let roots = -1;
  for (let j = n - 1; j >= 0; --j) { // backwards, so that lists come out ascending
    const p = i32At(parent, j);
    if (p < 0) { setI32(next, j, roots); roots = j; } else { setI32(next, j, i32At(head, p)); setI32(head, p, j); }
  }
  let t = 0;
  for (let root = roots; root >= 0; root = i32At(next, root)) {
    let j = root;
    for (;;) {
      const child = i32At(head, j);
      if (child >= 0) { setI32(head, j, -1); j = child; continue; } // descend first; the list is not needed again
      setI32(post, t++, j);
      if (j == root) break;
      const sibling = i32At(next, j);
      j = sibling >= 0 ? sibling : i32At(parent, j);
    }
  }
}
