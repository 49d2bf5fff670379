/** The lower triangle of C op A·Aᵀ with C n × n and A n × k, both column-major. Entries above the diagonal of C are not touched.
 *  C must not overlap A. Cost n·(n + 1)·k flops. Each entry takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Source: Goto, van de Geijn (2008), "High-Performance Implementation of the Level-3 BLAS", ACM TOMS 35(1). */
import { bytes, entry, isFresh, isNegative } from "./mode";
import { multiply } from "./multiply";
import { LOWER, STORE, strip, tile } from "./tile";

/** Columns of C taken at a time, so that what lies below a diagonal block runs in `multiply`. */
const BLOCK = 96;

/** The diagonal tile of `w` ≤ 4 columns and the rows below it. */
// @ts-ignore: decorator
@inline function trapezoid(W: i32, NEGATIVE: bool, fresh: bool, below: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  const none = f64x2.splat(0);
  tile(W, W, NEGATIVE, LOWER, fresh, k, a, aCol, a, aCol, 8, c, cCol, none, none, none, none);
  if (W == 4) strip(4, NEGATIVE, STORE, fresh, below, k, a + 32, aCol, a, aCol, 8, c + 32, cCol, none, none, none, none);
}
// @ts-ignore: decorator
@inline function triangle(NEGATIVE: bool, fresh: bool, n: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  for (; n >= 4; n -= 4, a += 32, c += 32 + 4 * cCol) trapezoid(4, NEGATIVE, fresh, n - 4, k, a, aCol, c, cCol);
  if (n == 3) trapezoid(3, NEGATIVE, fresh, 0, k, a, aCol, c, cCol);
  else if (n == 2) trapezoid(2, NEGATIVE, fresh, 0, k, a, aCol, c, cCol);
  else if (n == 1) trapezoid(1, NEGATIVE, fresh, 0, k, a, aCol, c, cCol);
}
function addTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  triangle(false, fresh, n, k, a, aCol, c, cCol);
}
function subtractTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  triangle(true, fresh, n, k, a, aCol, c, cCol);
}

export function rankUpdateLower(n: i32, k: i32, a: usize, lda: i32, c: usize, ldc: i32, mode: i32): void {
  for (let j = 0; j < n; j += BLOCK) {
    const w = min(BLOCK, n - j), rows = a + bytes(j), diagonal = entry(c, ldc, j, j);
    if (isNegative(mode)) subtractTriangle(isFresh(mode), w, k, rows, bytes(lda), diagonal, bytes(ldc));
    else addTriangle(isFresh(mode), w, k, rows, bytes(lda), diagonal, bytes(ldc));
    if (j + w < n) multiply(n - j - w, w, k, rows + bytes(w), lda, rows, lda, 1, diagonal + bytes(w), ldc, mode);
  }
}
