/** C op A·B with C m × n, A m × k, B k × n.
 *  a, c: column-major, leading dimensions lda, ldc (elements, either sign). Entry (p, j) of B lies at b + 8·(p·bRow + j·bCol):
 *  bRow = 1, bCol = ldb for a column-major B; bRow = ldb, bCol = 1 for the transpose of one. mode as in mode.ts.
 *  C must not overlap A or B. Any of m, n, k may be 0; with k = 0 the modes that do not read C set it to zero.
 *  Cost 2·m·n·k flops. Each entry of C takes its terms in the order p = 0, 1, …, from C or from zero.
 *  Source: Goto, van de Geijn (2008), ACM TOMS 34(3). */
import { bytes, isFresh, isNegative } from "./mode";
import { STORE, strip } from "./tile";

// @ts-ignore: decorator
@inline function tiles(
  NEGATIVE: bool, fresh: bool, m: i32, n: i32, k: i32,
  a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  const none = f64x2.splat(0);
  for (; n >= 4; n -= 4, b += 4 * bCol, c += 4 * cCol) {
    strip(4, NEGATIVE, STORE, fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  }
  if (n == 3) strip(3, NEGATIVE, STORE, fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 2) strip(2, NEGATIVE, STORE, fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 1) strip(1, NEGATIVE, STORE, fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
}
/** Strides in bytes from here on. */
function addTiles(
  fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  tiles(false, fresh, m, n, k, a, aCol, b, bRow, bCol, c, cCol);
}
function subtractTiles(
  fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  tiles(true, fresh, m, n, k, a, aCol, b, bRow, bCol, c, cCol);
}

export function multiply(
  m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, bRow: i32, bCol: i32, c: usize, ldc: i32, mode: i32,
): void {
  if (isNegative(mode)) subtractTiles(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(bRow), bytes(bCol), c, bytes(ldc));
  else addTiles(isFresh(mode), m, n, k, a, bytes(lda), b, bytes(bRow), bytes(bCol), c, bytes(ldc));
}
