/** C op Aᵀ·B with C m × n, A k × m, B k × n, all column-major, and the lower triangle alone of a square C known to be symmetric.
 *  C must not overlap A or B. Cost 2·m·n·k flops (about half of it for the triangle).
 *  Four columns of A at a time are turned into four rows in a small buffer that stays in the nearest cache.
 *  Each entry of C takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Source: Goto, van de Geijn (2008), ACM TOMS 34(3) (packing). */
import { bytes, continued, entry } from "./mode";
import { multiply } from "./multiply";
import { transposeInto } from "./transpose";

/** Terms of a sum that the buffer holds for four rows: 8 kB. */
const TERMS = 256;
const buffer = memory.data(TERMS * 32, 16);

export function multiplyTransposed(
  m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  if (k == 0) { multiply(m, n, 0, a, 4, b, 1, ldb, c, ldc, mode); return; }
  for (let p = 0; p < k; p += TERMS, mode = continued(mode)) {
    const terms = min(TERMS, k - p);
    for (let i = 0; i < m; i += 4) {
      const rows = min(4, m - i);
      transposeInto(terms, rows, entry(a, lda, p, i), lda, buffer, 4);
      multiply(rows, n, terms, buffer, 4, b + bytes(p), 1, ldb, c + bytes(i), ldc, mode);
    }
  }
}

/** The lower triangle of C op Aᵀ·B, C w × w, A and B m × w (sums over m). Entries above the diagonal of C are not touched. */
export function multiplyTransposedLower(
  w: i32, m: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  for (let j = 0; j < w; j += 4) {
    const cols = min(4, w - j), bj = entry(b, ldb, 0, j);
    for (let q = 0; q < cols; ++q) { // the square on the diagonal, column by column from the diagonal down
      multiplyTransposed(cols - q, 1, m, entry(a, lda, 0, j + q), lda, entry(bj, ldb, 0, q), ldb, entry(c, ldc, j + q, j + q), ldc, mode);
    }
    multiplyTransposed(w - j - cols, cols, m, entry(a, lda, 0, j + cols), lda, bj, ldb, entry(c, ldc, j + cols, j), ldc, mode);
  }
}
