/** C op Aᵀ·B with C m × n, A k × m, B k × n, all column-major, and the lower triangle alone of a square C known to be symmetric.
 *  C must not overlap A or B. Cost 2·m·n·k flops (about half of it for the triangle).
 *  Each entry of C takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Source: Goto, van de Geijn (2008), "Anatomy of High-Performance Matrix Multiplication", ACM TOMS 34(3). */
import { bytes, entry, isFresh, isNegative } from "./mode";
import { multiplyBlocked } from "./multiply";
import { rectangle } from "./rectangle";
import { Minus, Plus, Transposed } from "./tile";
import { triangle } from "./triangle";

/** From so many columns of C on, a copy of A turned into rows is quicker than gathering rows from columns for each of them. */
const MANY = 64;
/** Columns of a triangle taken at a time, so that what lies below a diagonal block runs in `multiplyTransposed`. */
const BLOCK = 48;

function add(fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bCol: usize, c: usize, cCol: usize): void {
  rectangle<Plus, Transposed>(fresh, m, n, k, a, aCol, b, 8, bCol, c, cCol);
}
function subtract(fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bCol: usize, c: usize, cCol: usize): void {
  rectangle<Minus, Transposed>(fresh, m, n, k, a, aCol, b, 8, bCol, c, cCol);
}
function addTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, b: usize, bCol: usize, c: usize, cCol: usize): void {
  triangle<Plus, Transposed>(fresh, n, k, a, aCol, b, 8, bCol, c, cCol);
}
function subtractTriangle(fresh: bool, n: i32, k: i32, a: usize, aCol: usize, b: usize, bCol: usize, c: usize, cCol: usize): void {
  triangle<Minus, Transposed>(fresh, n, k, a, aCol, b, 8, bCol, c, cCol);
}

export function multiplyTransposed(
  m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  if (n >= MANY && k >= MANY) multiplyBlocked(true, m, n, k, a, lda, b, 1, ldb, c, ldc, mode);
  else if (isNegative(mode)) subtract(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(ldb), c, bytes(ldc));
  else add(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(ldb), c, bytes(ldc));
}

/** The lower triangle of C op Aᵀ·B, C w × w, A and B m × w (sums over m). Entries above the diagonal of C are not touched. */
export function multiplyTransposedLower(
  w: i32, m: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  for (let j = 0; j < w; j += BLOCK) {
    const cols = min(BLOCK, w - j), aj = entry(a, lda, 0, j), bj = entry(b, ldb, 0, j), diagonal = entry(c, ldc, j, j), next = j + cols;
    if (isNegative(mode)) subtractTriangle(isFresh(mode), cols, m, aj, bytes(lda), bj, bytes(ldb), diagonal, bytes(ldc));
    else addTriangle(isFresh(mode), cols, m, aj, bytes(lda), bj, bytes(ldb), diagonal, bytes(ldc));
    if (next < w) multiplyTransposed(w - next, cols, m, entry(a, lda, 0, next), lda, bj, ldb, diagonal + bytes(cols), ldc, mode);
  }
}
