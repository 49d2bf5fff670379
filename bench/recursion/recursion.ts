// The published recursion for the entries of the inverse on the pattern of L, element by element, as a measure for the bench:
//   Z[i, j] = −(Σ_k Z[i, k] L[k, j]) / L[j, j],   Z[j, j] = (1 / L[j, j] − Σ_k Z[k, j] L[k, j]) / L[j, j],   k over the rows below j in column j,
// from the last column to the first. Sources: Takahashi, Fagan, Chen (1973); Erisman, Tinney (1975), Comm. ACM 18.
//
// In its best scalar form: the rows of column j below an entry i are among those of column i (George, Liu 1981, ch. 5), so one pass along both
// sorted lists finds every Z[k, i] that i needs, and serves both Z[i, k] L[k, j] and its mirror Z[k, i] L[i, j]. No search, no dense work array
// of length n, no supernodes.
export { allocate, release } from "../../assembly/memory/heap";
import { f64At, i32At, setF64 } from "../../assembly/memory/access";

/** columnStart i32[n + 1], rowIndex i32[nnz], value f64[nnz]: L by columns, rows ascending, the diagonal entry first in each.
 *  inverse f64[nnz]: Z at the same places on return.   sums f64[longest column]: workspace.
 *  Cost: Σ over entries (i, j) of L of the length of column i in index comparisons, two multiply-adds an entry met. */
export function selectedInverse(n: i32, columnStart: usize, rowIndex: usize, value: usize, inverse: usize, sums: usize): void {
  for (let j = n - 1; j >= 0; --j) {
    const diagonal = i32At(columnStart, j), end = i32At(columnStart, j + 1), below = diagonal + 1;
    for (let p = below; p < end; ++p) setF64(sums, p - below, 0);
    for (let p = below; p < end; ++p) {
      const i = i32At(rowIndex, p), l = f64At(value, p);
      let q = i32At(columnStart, i);
      let own = f64At(sums, p - below) + f64At(inverse, q) * l;
      for (let r = p + 1; r < end; ++r) {
        const k = i32At(rowIndex, r);
        do ++q; while (i32At(rowIndex, q) < k);
        const z = f64At(inverse, q);
        own += z * f64At(value, r);
        setF64(sums, r - below, f64At(sums, r - below) + z * l);
      }
      setF64(sums, p - below, own);
    }
    const pivot = 1 / f64At(value, diagonal);
    let variance = pivot;
    for (let p = below; p < end; ++p) {
      const z = -f64At(sums, p - below) * pivot;
      setF64(inverse, p, z);
      variance -= z * f64At(value, p);
    }
    setF64(inverse, diagonal, variance * pivot);
  }
}
