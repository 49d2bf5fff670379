/** The register tile that the dense kernels are made of: ROWS × COLS entries of C, each from 1 to 4, in at most eight
 *  accumulators of two rows, run over the k terms of the sum.
 *
 *  Every function here is inlined, and its parameters in capitals are constants at each call, so that the compiler folds one
 *  source into all the shapes. Strides are in bytes and may be negative. Element (i, p) of A lies at a + 8·i + p·aCol,
 *  element (p, j) of B at b + p·bRow + j·bCol, element (i, j) of C at c + 8·i + j·cCol.
 *  Rows of a short tile that do not exist are neither read nor written.
 *  Order of summation: each entry starts from C (or from zero) and takes its terms one after another, p = 0, 1, …, so the bits
 *  of a result do not depend on how a caller cuts the matrices into tiles and blocks.
 *  Source: Goto, van de Geijn (2008), "Anatomy of High-Performance Matrix Multiplication", ACM TOMS 34(3). */
import { madd, nmadd } from "./madd";

/** What becomes of the sums: they are stored; */
// @ts-ignore: decorator
@inline export const STORE = 0;
/** solved for X·Lᵀ = C, and X stored; */
// @ts-ignore: decorator
@inline export const SOLVE = 1;
/** stored on and below the diagonal of a square tile. */
// @ts-ignore: decorator
@inline export const LOWER = 2;

// @ts-ignore: decorator
@inline function step(NEGATIVE: bool, a: v128, b: v128, c: v128): v128 { return NEGATIVE ? nmadd(a, b, c) : madd(a, b, c); }
/** Rows 0 and 1 of a column, or row 0 alone. */
// @ts-ignore: decorator
@inline function top(ROWS: i32, at: usize): v128 { return ROWS == 1 ? v128.load64_zero(at) : v128.load(at); }
/** Rows 2 and 3 of a column, or row 2 alone. */
// @ts-ignore: decorator
@inline function bottom(ROWS: i32, at: usize): v128 { return ROWS == 3 ? v128.load64_zero(at, 16) : v128.load(at, 16); }
// @ts-ignore: decorator
@inline function setTop(ROWS: i32, at: usize, v: v128): void { if (ROWS == 1) v128.store64_lane(at, v, 0); else v128.store(at, v); }
// @ts-ignore: decorator
@inline function setBottom(ROWS: i32, at: usize, v: v128): void {
  if (ROWS == 3) v128.store64_lane(at, v, 0, 16); else v128.store(at, v, 16);
}

/** One tile. `fresh`: the sums start from zero and C is not read. FINISH = LOWER wants ROWS = COLS. FINISH = SOLVE wants the
 *  COLS × COLS lower triangle L behind the k terms of B (its entry (j, q) where B(k + q, j) would be), and the reciprocals
 *  r0 … r3 of its diagonal in both lanes; what is stored is X = (C ± A·B)·L⁻ᵀ. */
// @ts-ignore: decorator
@inline export function tile(
  ROWS: i32, COLS: i32, NEGATIVE: bool, FINISH: i32, fresh: bool, k: i32,
  a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
  r0: v128, r1: v128, r2: v128, r3: v128,
): void {
  let c00 = f64x2.splat(0), c01 = c00, c02 = c00, c03 = c00, c20 = c00, c21 = c00, c22 = c00, c23 = c00;
  if (!fresh) {
    let at = c;
    c00 = top(ROWS, at);
    if (ROWS > 2) c20 = bottom(ROWS, at);
    if (COLS > 1) {
      at += cCol;
      c01 = top(ROWS, at);
      if (ROWS > 2) c21 = bottom(ROWS, at);
    }
    if (COLS > 2) {
      at += cCol;
      if (FINISH != LOWER) c02 = top(ROWS, at);
      if (ROWS > 2) c22 = bottom(ROWS, at);
    }
    if (COLS > 3) {
      at += cCol;
      if (FINISH != LOWER) c03 = top(ROWS, at);
      if (ROWS > 2) c23 = bottom(ROWS, at);
    }
  }
  for (const end = a + <usize>k * aCol; a != end; a += aCol, b += bRow) {
    const a0 = top(ROWS, a);
    let a2 = a0;
    if (ROWS > 2) a2 = bottom(ROWS, a);
    let s = v128.load64_splat(b);
    c00 = step(NEGATIVE, a0, s, c00);
    if (ROWS > 2) c20 = step(NEGATIVE, a2, s, c20);
    let bj = b;
    if (COLS > 1) {
      bj += bCol;
      s = v128.load64_splat(bj);
      c01 = step(NEGATIVE, a0, s, c01);
      if (ROWS > 2) c21 = step(NEGATIVE, a2, s, c21);
    }
    if (COLS > 2) {
      bj += bCol;
      s = v128.load64_splat(bj);
      if (FINISH != LOWER) c02 = step(NEGATIVE, a0, s, c02);
      if (ROWS > 2) c22 = step(NEGATIVE, a2, s, c22);
    }
    if (COLS > 3) {
      bj += bCol;
      s = v128.load64_splat(bj);
      if (FINISH != LOWER) c03 = step(NEGATIVE, a0, s, c03);
      if (ROWS > 2) c23 = step(NEGATIVE, a2, s, c23);
    }
  }
  if (FINISH == SOLVE) { // b stands on row k; x[j] = (c[j] − Σ x[q]·l[j, q]) ÷ l[j, j], column by column
    c00 = f64x2.mul(c00, r0);
    if (ROWS > 2) c20 = f64x2.mul(c20, r0);
    let bj = b;
    if (COLS > 1) {
      bj += bCol;
      const s = v128.load64_splat(bj);
      c01 = f64x2.mul(nmadd(c00, s, c01), r1);
      if (ROWS > 2) c21 = f64x2.mul(nmadd(c20, s, c21), r1);
    }
    if (COLS > 2) {
      bj += bCol;
      const s = v128.load64_splat(bj), t = v128.load64_splat(bj + bRow);
      c02 = f64x2.mul(nmadd(c01, t, nmadd(c00, s, c02)), r2);
      if (ROWS > 2) c22 = f64x2.mul(nmadd(c21, t, nmadd(c20, s, c22)), r2);
    }
    if (COLS > 3) {
      bj += bCol;
      const s = v128.load64_splat(bj), t = v128.load64_splat(bj + bRow), u = v128.load64_splat(bj + 2 * bRow);
      c03 = f64x2.mul(nmadd(c02, u, nmadd(c01, t, nmadd(c00, s, c03))), r3);
      if (ROWS > 2) c23 = f64x2.mul(nmadd(c22, u, nmadd(c21, t, nmadd(c20, s, c23))), r3);
    }
  }
  setTop(ROWS, c, c00);
  if (ROWS > 2) setBottom(ROWS, c, c20);
  if (COLS > 1) {
    c += cCol;
    if (FINISH == LOWER) v128.store64_lane(c, c01, 1, 8); else setTop(ROWS, c, c01);
    if (ROWS > 2) setBottom(ROWS, c, c21);
  }
  if (COLS > 2) {
    c += cCol;
    if (FINISH != LOWER) setTop(ROWS, c, c02);
    if (ROWS > 2) setBottom(ROWS, c, c22);
  }
  if (COLS > 3) {
    c += cCol;
    if (FINISH != LOWER) setTop(ROWS, c, c03);
    if (FINISH == LOWER) v128.store64_lane(c, c23, 1, 24);
    else if (ROWS > 2) setBottom(ROWS, c, c23);
  }
}

/** The m × COLS strip of C, m ≥ 0, in tiles of four rows and a rest. */
// @ts-ignore: decorator
@inline export function strip(
  COLS: i32, NEGATIVE: bool, FINISH: i32, fresh: bool, m: i32, k: i32,
  a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
  r0: v128, r1: v128, r2: v128, r3: v128,
): void {
  for (; m >= 4; m -= 4, a += 32, c += 32) {
    tile(4, COLS, NEGATIVE, FINISH, fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  }
  if (m == 3) tile(3, COLS, NEGATIVE, FINISH, fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  else if (m == 2) tile(2, COLS, NEGATIVE, FINISH, fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  else if (m == 1) tile(1, COLS, NEGATIVE, FINISH, fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
}
