/** Triangular solves from the left, in place: L·X = B and Lᵀ·X = B, L w × w lower triangular, column-major, entries above its
 *  diagonal not read, no zero on the diagonal; X one vector, or w × n, column-major with leading dimension ldx.
 *  Cost w² flops a column. Strips of four unknowns: solved, or first relieved of all that is known.
 *  L·x = b and both forms with many columns take their terms away one after another as they become known; Lᵀ·x = b with one
 *  column sums in two lanes (see `subtractTransposedProduct`) outside its strips of four.
 *  Source: Golub, Van Loan, Matrix Computations, section 3.1. */
import { nmadd } from "./madd";
import { bytes, entry, SUBTRACT } from "./mode";
import { multiply } from "./multiply";
import { multiplyTransposed } from "./multiply-transposed";
import { subtractProduct, subtractTransposedProduct } from "./vector";

/** Rows solved in strips before `multiply` carries them on. */
const BLOCK = 96;

/** L·x = b, one vector of length w. */
export function solveLower(w: i32, l: usize, ld: i32, x: usize): void {
  const col = bytes(ld);
  for (; w > 0; w -= 4, l += 32 + 4 * col, x += 32) {
    const x0 = load<f64>(x) / load<f64>(l);
    store<f64>(x, x0);
    if (w == 1) return;
    const x1 = (load<f64>(x, 8) - x0 * load<f64>(l, 8)) / load<f64>(l + col, 8);
    store<f64>(x, x1, 8);
    if (w == 2) return;
    const x2 = (load<f64>(x, 16) - x0 * load<f64>(l, 16) - x1 * load<f64>(l + col, 16)) / load<f64>(l + 2 * col, 16);
    store<f64>(x, x2, 16);
    if (w == 3) return;
    const partial = load<f64>(x, 24) - x0 * load<f64>(l, 24) - x1 * load<f64>(l + col, 24);
    store<f64>(x, (partial - x2 * load<f64>(l + 2 * col, 24)) / load<f64>(l + 3 * col, 24), 24);
    subtractProduct(w - 4, 4, l + 32, ld, x, x + 32);
  }
}

/** Lᵀ·x = b, one vector of length w. */
export function solveLowerTransposed(w: i32, l: usize, ld: i32, x: usize): void {
  const col = bytes(ld);
  for (let j = w - 1 & ~3; j >= 0; j -= 4) {
    const cols = min(4, w - j), at = entry(l, ld, j, j), y = x + bytes(j);
    if (cols == 4) subtractTransposedProduct(w - j - 4, 4, at + 32, ld, y + 32, y);
    let x3 = 0.0, x2 = 0.0, x1 = 0.0;
    if (cols > 3) { x3 = load<f64>(y, 24) / load<f64>(at + 3 * col, 24); store<f64>(y, x3, 24); }
    if (cols > 2) {
      x2 = load<f64>(y, 16);
      if (cols > 3) x2 -= x3 * load<f64>(at + 2 * col, 24);
      x2 /= load<f64>(at + 2 * col, 16);
      store<f64>(y, x2, 16);
    }
    if (cols > 1) {
      x1 = load<f64>(y, 8);
      if (cols > 3) x1 -= x3 * load<f64>(at + col, 24);
      if (cols > 2) x1 -= x2 * load<f64>(at + col, 16);
      x1 /= load<f64>(at + col, 8);
      store<f64>(y, x1, 8);
    }
    let x0 = load<f64>(y);
    if (cols > 3) x0 -= x3 * load<f64>(at, 24);
    if (cols > 2) x0 -= x2 * load<f64>(at, 16);
    if (cols > 1) x0 -= x1 * load<f64>(at, 8);
    store<f64>(y, x0 / load<f64>(at));
  }
}

/** Two entries of one row of X, in columns that lie xCol bytes apart; with PAIR false the first alone. */
// @ts-ignore: decorator
@inline function pair(PAIR: bool, x: usize, xCol: usize): v128 {
  const first = v128.load64_zero(x);
  return PAIR ? v128.load64_lane(x + xCol, first, 1) : first;
}
// @ts-ignore: decorator
@inline function setPair(PAIR: bool, x: usize, xCol: usize, v: v128): void {
  v128.store64_lane(x, v, 0);
  if (PAIR) v128.store64_lane(x + xCol, v, 1);
}

/** The triangle of order w ≤ 4, entry (j, q) at t + j·tRow + q·tCol, on one or two columns of X, rows xRow apart (bytes). */
// @ts-ignore: decorator
@inline function solvePair(PAIR: bool, w: i32, t: usize, tRow: usize, tCol: usize, x: usize, xRow: usize, xCol: usize): void {
  const x0 = f64x2.div(pair(PAIR, x, xCol), v128.load64_splat(t));
  setPair(PAIR, x, xCol, x0);
  if (w == 1) return;
  t += tRow;
  x += xRow;
  const x1 = f64x2.div(nmadd(v128.load64_splat(t), x0, pair(PAIR, x, xCol)), v128.load64_splat(t + tCol));
  setPair(PAIR, x, xCol, x1);
  if (w == 2) return;
  t += tRow;
  x += xRow;
  let s = nmadd(v128.load64_splat(t + tCol), x1, nmadd(v128.load64_splat(t), x0, pair(PAIR, x, xCol)));
  const x2 = f64x2.div(s, v128.load64_splat(t + 2 * tCol));
  setPair(PAIR, x, xCol, x2);
  if (w == 3) return;
  t += tRow;
  x += xRow;
  s = nmadd(v128.load64_splat(t + tCol), x1, nmadd(v128.load64_splat(t), x0, pair(PAIR, x, xCol)));
  s = nmadd(v128.load64_splat(t + 2 * tCol), x2, s);
  setPair(PAIR, x, xCol, f64x2.div(s, v128.load64_splat(t + 3 * tCol)));
}
function solveRows(w: i32, n: i32, t: usize, tRow: usize, tCol: usize, x: usize, xRow: usize, xCol: usize): void {
  for (; n >= 2; n -= 2, x += 2 * xCol) solvePair(true, w, t, tRow, tCol, x, xRow, xCol);
  if (n) solvePair(false, w, t, tRow, tCol, x, xRow, xCol);
}

/** L·X = B, n columns. */
export function solveLowerMany(w: i32, n: i32, l: usize, ld: i32, x: usize, ldx: i32): void {
  for (let from = 0; from < w; from += BLOCK) {
    const to = min(from + BLOCK, w), known = x + bytes(from);
    if (from) multiply(to - from, n, from, l + bytes(from), ld, x, 1, ldx, known, ldx, SUBTRACT);
    for (let i = from; i < to; i += 4) {
      const rows = min(4, to - i), at = x + bytes(i);
      if (i > from) multiply(rows, n, i - from, entry(l, ld, i, from), ld, known, 1, ldx, at, ldx, SUBTRACT);
      solveRows(rows, n, entry(l, ld, i, i), 8, bytes(ld), at, 8, bytes(ldx));
    }
  }
}

/** Lᵀ·X = B, n columns. */
export function solveLowerTransposedMany(w: i32, n: i32, l: usize, ld: i32, x: usize, ldx: i32): void {
  for (let i = w - 1 & ~3; i >= 0; i -= 4) {
    const rows = min(4, w - i), next = i + rows, last = next - 1;
    if (next < w) multiplyTransposed(rows, n, w - next, entry(l, ld, next, i), ld, x + bytes(next), ldx, x + bytes(i), ldx, SUBTRACT);
    solveRows(rows, n, entry(l, ld, last, last), -bytes(ld), -8, x + bytes(last), -8, bytes(ldx));
  }
}
