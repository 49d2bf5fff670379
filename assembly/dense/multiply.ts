/** C op A·B with C m × n, A m × k, B k × n.
 *  a, c: column-major, leading dimensions lda, ldc (elements, either sign, not 0). Entry (p, j) of B lies at b + 8·(p·bRow + j·bCol):
 *  bRow = 1, bCol = ldb for a column-major B; bRow = ldb, bCol = 1 for the transpose of one. mode as in mode.ts.
 *  C must not overlap A or B. Any of m, n, k may be 0; with k = 0 the modes that do not read C set it to zero.
 *  Cost 2·m·n·k flops. Each entry of C takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Large blocks of A, and strips of a transposed B, are copied into buffers that hold them in the order of use.
 *  Source: Goto, van de Geijn (2008), "Anatomy of High-Performance Matrix Multiplication", ACM TOMS 34(3). */
import { reserved } from "../memory/heap";
import { bytes, continued, isFresh, isNegative } from "./mode";
import { rectangle } from "./rectangle";
import { Minus, Plain, Plus } from "./tile";
import { transposeInto } from "./transpose";

/** Terms and rows of the block of A that is copied: 192 × 96 entries, 147 kB, in the second cache beside what else is in use. */
const TERMS = 192;
const ROWS = 96;
/** The copies pay from so many terms on, and from so many rows and columns of C. */
const LONG = 128;
const FEW = 16;
// @ts-ignore: decorator
@inline function blockOfA(): usize { return reserved(); }
// @ts-ignore: decorator
@inline function stripOfB(): usize { return reserved() + TERMS * ROWS * 8; }

/** Strides in bytes. */
function add(
  fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  rectangle<Plus, Plain>(fresh, m, n, k, a, aCol, b, bRow, bCol, c, cCol);
}
function subtract(
  fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  rectangle<Minus, Plain>(fresh, m, n, k, a, aCol, b, bRow, bCol, c, cCol);
}

/** Four (or fewer) rows of A, `terms` columns, one column after another in the buffer. */
function copyRows(rows: i32, terms: i32, a: usize, aCol: usize, to: usize): void {
  for (const end = to + (<usize>terms << 5); to != end; to += 32, a += aCol) {
    if (rows == 4) {
      v128.store(to, v128.load(a));
      v128.store(to, v128.load(a, 16), 16);
    } else for (let i: usize = 0; i < <usize>rows << 3; i += 8) store<f64>(to + i, load<f64>(a + i));
  }
}

/** As `multiply`, through the buffers; with `transposed`, A is k × m and C op Aᵀ·B. */
export function multiplyBlocked(
  transposed: bool, m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, bRow: i32, bCol: i32, c: usize, ldc: i32, mode: i32,
): void {
  const aCol = bytes(lda), cCol = bytes(ldc), minus = isNegative(mode);
  for (let p = 0; p < k; p += TERMS, mode = continued(mode)) {
    const terms = min(TERMS, k - p), fresh = isFresh(mode);
    for (let from = 0; from < m; from += ROWS) {
      const to = min(from + ROWS, m);
      for (let i = from; i < to; i += 4) {
        const rows = min(4, to - i), copy = blockOfA() + bytes((i - from) * terms);
        if (transposed) transposeInto(terms, rows, a + bytes(p) + <usize>i * aCol, lda, copy, 4);
        else copyRows(rows, terms, a + bytes(i) + <usize>p * aCol, aCol, copy);
      }
      for (let j = 0; j < n; j += 4) {
        const cols = min(4, n - j);
        let strip = b + bytes(p * bRow) + bytes(j * bCol), row = bytes(bRow), col = bytes(bCol);
        if (bCol == 1) {
          copyRows(cols, terms, strip, row, stripOfB());
          strip = stripOfB();
          row = 32;
          col = 8;
        }
        for (let i = from; i < to; i += 4) {
          const rows = min(4, to - i), copy = blockOfA() + bytes((i - from) * terms), at = c + bytes(i) + <usize>j * cCol;
          if (minus) subtract(fresh, rows, cols, terms, copy, 32, strip, row, col, at, cCol);
          else add(fresh, rows, cols, terms, copy, 32, strip, row, col, at, cCol);
        }
      }
    }
  }
}

export function multiply(
  m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, bRow: i32, bCol: i32, c: usize, ldc: i32, mode: i32,
): void {
  if (k >= LONG && m >= FEW && n >= FEW) multiplyBlocked(false, m, n, k, a, lda, b, bRow, bCol, c, ldc, mode);
  else if (isNegative(mode)) subtract(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(bRow), bytes(bCol), c, bytes(ldc));
  else add(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(bRow), bytes(bCol), c, bytes(ldc));
}
