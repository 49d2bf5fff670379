/** The lower triangle of C op A·Aᵀ with C n × n and A n × k, both column-major. Entries above the diagonal of C are not touched.
 *  C must not overlap A. Cost n·(n + 1)·k flops. Each entry takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Source: Goto, van de Geijn (2008), "High-Performance Implementation of the Level-3 BLAS", ACM TOMS 35(1). */
import { bytes, entry, isFresh, isNegative } from "./mode";
import { multiply } from "./multiply";
import { Minus, Plain, Plus } from "./tile";
import { triangle } from "./triangle";

/** Columns of C taken at a time, so that what lies below a diagonal block runs in `multiply`. */
const BLOCK = 96;

function addTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  triangle<Plus, Plain>(fresh, n, k, a, aCol, a, aCol, 8, c, cCol);
}
/** The triangle alone, of any order, C −= A·Aᵀ or C := −A·Aᵀ; strides in bytes. */
export function subtractTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, c: usize, cCol: usize): void {
  triangle<Minus, Plain>(fresh, n, k, a, aCol, a, aCol, 8, c, cCol);
}

export function rankUpdateLower(n: i32, k: i32, a: usize, lda: i32, c: usize, ldc: i32, mode: i32): void {
  for (let j = 0; j < n; j += BLOCK) {
    const w = min(BLOCK, n - j), rows = a + bytes(j), diagonal = entry(c, ldc, j, j);
    if (isNegative(mode)) subtractTriangle(isFresh(mode), w, k, rows, bytes(lda), diagonal, bytes(ldc));
    else addTriangle(isFresh(mode), w, k, rows, bytes(lda), diagonal, bytes(ldc));
    if (j + w < n) multiply(n - j - w, w, k, rows + bytes(w), lda, rows, lda, 1, diagonal + bytes(w), ldc, mode);
  }
}
