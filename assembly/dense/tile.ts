/** The register tile that the dense kernels are made of: ROWS × COLS entries of C, each from 1 to 4, in at most eight
 *  accumulators of two rows, run over the k terms of the sum.
 *
 *  One source makes all the shapes. Shape, sign and finish are types, told apart by their size, because the compiler settles
 *  `sizeof` before it emits anything (constants as arguments of inlined functions left every branch to the optimizer, and took
 *  three times as long to build). Strides are in bytes and may be negative. Element (i, p) of A lies at a + 8·i + p·aCol
 *  (LAYOUT = Plain) or at a + 8·p + i·aCol (Transposed), element (p, j) of B at b + p·bRow + j·bCol, element (i, j) of C at
 *  c + 8·i + j·cCol.
 *  Rows of a short tile that do not exist are neither read nor written.
 *  Order of summation: each entry starts from C (or from zero) and takes its terms one after another, p = 0, 1, …, so the bits
 *  of a result do not depend on how a caller cuts the matrices into tiles and blocks.
 *  Source: Goto, van de Geijn (2008), "Anatomy of High-Performance Matrix Multiplication", ACM TOMS 34(3). */
import { madd, nmadd } from "./madd";

export type One = i8;
export type Two = i16;
export type Three = i32;
export type Four = i64;

/** C + A·B, or C − A·B. */
export type Plus = i8;
export type Minus = i16;

/** A as it lies in memory, or the transpose of that. */
export type Plain = i8;
export type Transposed = i16;

/** What becomes of the sums: they are stored; solved for X·Lᵀ = C, and X stored; stored on and below the diagonal of a square. */
export type Store = i8;
export type Solve = i16;
export type Lower = i32;

// @ts-ignore: decorator
@inline function step<SIGN>(a: v128, b: v128, c: v128): v128 {
  return sizeof<SIGN>() == sizeof<Minus>() ? nmadd(a, b, c) : madd(a, b, c);
}
/** Rows 0 and 1 of a column, or row 0 alone. */
// @ts-ignore: decorator
@inline function top<ROWS>(at: usize): v128 { return sizeof<ROWS>() == sizeof<One>() ? v128.load64_zero(at) : v128.load(at); }
/** Rows 2 and 3 of a column, or row 2 alone. */
// @ts-ignore: decorator
@inline function bottom<ROWS>(at: usize): v128 {
  return sizeof<ROWS>() == sizeof<Three>() ? v128.load64_zero(at, 16) : v128.load(at, 16);
}
// @ts-ignore: decorator
@inline function setTop<ROWS>(at: usize, v: v128): void {
  if (sizeof<ROWS>() == sizeof<One>()) v128.store64_lane(at, v, 0); else v128.store(at, v);
}
// @ts-ignore: decorator
@inline function setBottom<ROWS>(at: usize, v: v128): void {
  if (sizeof<ROWS>() == sizeof<Three>()) v128.store64_lane(at, v, 0, 16); else v128.store(at, v, 16);
}

/** Rows 0 and 1 of one column of A, or row 0 alone. */
// @ts-ignore: decorator
@inline function topOf<ROWS, LAYOUT>(a: usize, aCol: usize): v128 {
  if (sizeof<LAYOUT>() == sizeof<Plain>()) return top<ROWS>(a);
  const first = v128.load64_zero(a);
  return sizeof<ROWS>() == sizeof<One>() ? first : v128.load64_lane(a + aCol, first, 1);
}
/** Rows 2 and 3 of one column of A, or row 2 alone. */
// @ts-ignore: decorator
@inline function bottomOf<ROWS, LAYOUT>(a: usize, aCol: usize): v128 {
  if (sizeof<LAYOUT>() == sizeof<Plain>()) return bottom<ROWS>(a);
  const at = a + aCol + aCol, first = v128.load64_zero(at);
  return sizeof<ROWS>() == sizeof<Three>() ? first : v128.load64_lane(at + aCol, first, 1);
}

/** One tile. `fresh`: the sums start from zero and C is not read. FINISH = Lower wants ROWS = COLS. FINISH = Solve wants the
 *  COLS × COLS lower triangle L behind the k terms of B (its entry (j, q) where B(k + q, j) would be), and the reciprocals
 *  r0 … r3 of its diagonal in both lanes; what is stored is X = (C ± A·B)·L⁻ᵀ. */
// @ts-ignore: decorator
@inline export function tile<ROWS, COLS, SIGN, LAYOUT, FINISH>(
  fresh: bool, k: i32,
  a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
  r0: v128, r1: v128, r2: v128, r3: v128,
): void {
  let c00 = f64x2.splat(0), c01 = c00, c02 = c00, c03 = c00, c20 = c00, c21 = c00, c22 = c00, c23 = c00;
  if (!fresh) {
    let at = c;
    c00 = top<ROWS>(at);
    if (sizeof<ROWS>() >= sizeof<Three>()) c20 = bottom<ROWS>(at);
    if (sizeof<COLS>() >= sizeof<Two>()) {
      at += cCol;
      c01 = top<ROWS>(at);
      if (sizeof<ROWS>() >= sizeof<Three>()) c21 = bottom<ROWS>(at);
    }
    if (sizeof<COLS>() >= sizeof<Three>()) {
      at += cCol;
      if (sizeof<FINISH>() != sizeof<Lower>()) c02 = top<ROWS>(at);
      if (sizeof<ROWS>() >= sizeof<Three>()) c22 = bottom<ROWS>(at);
    }
    if (sizeof<COLS>() >= sizeof<Four>()) {
      at += cCol;
      if (sizeof<FINISH>() != sizeof<Lower>()) c03 = top<ROWS>(at);
      if (sizeof<ROWS>() >= sizeof<Three>()) c23 = bottom<ROWS>(at);
    }
  }
  const aStep: usize = sizeof<LAYOUT>() == sizeof<Plain>() ? aCol : 8;
  // Four columns of B on a pointer each are 7 % faster than on one; two or three on one are 8 % faster than on a pointer each.
  let b1 = b + bCol, b2 = b1 + bCol, b3 = b2 + bCol;
  for (const end = a + <usize>k * aStep; a != end; a += aStep, b += bRow) {
    const a0 = topOf<ROWS, LAYOUT>(a, aCol);
    let a2 = a0;
    if (sizeof<ROWS>() >= sizeof<Three>()) a2 = bottomOf<ROWS, LAYOUT>(a, aCol);
    let s = v128.load64_splat(b);
    c00 = step<SIGN>(a0, s, c00);
    if (sizeof<ROWS>() >= sizeof<Three>()) c20 = step<SIGN>(a2, s, c20);
    if (sizeof<COLS>() >= sizeof<Two>()) {
      s = v128.load64_splat(b1);
      c01 = step<SIGN>(a0, s, c01);
      if (sizeof<ROWS>() >= sizeof<Three>()) c21 = step<SIGN>(a2, s, c21);
    }
    if (sizeof<COLS>() >= sizeof<Three>()) {
      s = v128.load64_splat(b2);
      if (sizeof<FINISH>() != sizeof<Lower>()) c02 = step<SIGN>(a0, s, c02);
      if (sizeof<ROWS>() >= sizeof<Three>()) c22 = step<SIGN>(a2, s, c22);
    }
    if (sizeof<COLS>() >= sizeof<Four>()) {
      s = v128.load64_splat(b3);
      if (sizeof<FINISH>() != sizeof<Lower>()) c03 = step<SIGN>(a0, s, c03);
      if (sizeof<ROWS>() >= sizeof<Three>()) c23 = step<SIGN>(a2, s, c23);
    }
    if (sizeof<COLS>() == sizeof<Four>()) { b1 += bRow; b2 += bRow; b3 += bRow; }
    else { b1 = b + bRow + bCol; b2 = b1 + bCol; }
  }
  if (sizeof<FINISH>() == sizeof<Solve>()) { // b stands on row k; x[j] = (c[j] − Σ x[q]·l[j, q]) ÷ l[j, j], column by column
    c00 = f64x2.mul(c00, r0);
    if (sizeof<ROWS>() >= sizeof<Three>()) c20 = f64x2.mul(c20, r0);
    let bj = b;
    if (sizeof<COLS>() >= sizeof<Two>()) {
      bj += bCol;
      const s = v128.load64_splat(bj);
      c01 = f64x2.mul(nmadd(c00, s, c01), r1);
      if (sizeof<ROWS>() >= sizeof<Three>()) c21 = f64x2.mul(nmadd(c20, s, c21), r1);
    }
    if (sizeof<COLS>() >= sizeof<Three>()) {
      bj += bCol;
      const s = v128.load64_splat(bj), t = v128.load64_splat(bj + bRow);
      c02 = f64x2.mul(nmadd(c01, t, nmadd(c00, s, c02)), r2);
      if (sizeof<ROWS>() >= sizeof<Three>()) c22 = f64x2.mul(nmadd(c21, t, nmadd(c20, s, c22)), r2);
    }
    if (sizeof<COLS>() >= sizeof<Four>()) {
      bj += bCol;
      const s = v128.load64_splat(bj), t = v128.load64_splat(bj + bRow), u = v128.load64_splat(bj + 2 * bRow);
      c03 = f64x2.mul(nmadd(c02, u, nmadd(c01, t, nmadd(c00, s, c03))), r3);
      if (sizeof<ROWS>() >= sizeof<Three>()) c23 = f64x2.mul(nmadd(c22, u, nmadd(c21, t, nmadd(c20, s, c23))), r3);
    }
  }
  setTop<ROWS>(c, c00);
  if (sizeof<ROWS>() >= sizeof<Three>()) setBottom<ROWS>(c, c20);
  if (sizeof<COLS>() >= sizeof<Two>()) {
    c += cCol;
    if (sizeof<FINISH>() == sizeof<Lower>()) v128.store64_lane(c, c01, 1, 8); else setTop<ROWS>(c, c01);
    if (sizeof<ROWS>() >= sizeof<Three>()) setBottom<ROWS>(c, c21);
  }
  if (sizeof<COLS>() >= sizeof<Three>()) {
    c += cCol;
    if (sizeof<FINISH>() != sizeof<Lower>()) setTop<ROWS>(c, c02);
    if (sizeof<ROWS>() >= sizeof<Three>()) setBottom<ROWS>(c, c22);
  }
  if (sizeof<COLS>() >= sizeof<Four>()) {
    c += cCol;
    if (sizeof<FINISH>() != sizeof<Lower>()) setTop<ROWS>(c, c03);
    if (sizeof<FINISH>() == sizeof<Lower>()) v128.store64_lane(c, c23, 1, 24);
    else if (sizeof<ROWS>() >= sizeof<Three>()) setBottom<ROWS>(c, c23);
  }
}

/** The m × COLS strip of C, m ≥ 0, in tiles of four rows and a rest. */
// @ts-ignore: decorator
@inline export function strip<COLS, SIGN, LAYOUT, FINISH>(
  fresh: bool, m: i32, k: i32,
  a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
  r0: v128, r1: v128, r2: v128, r3: v128,
): void {
  const aNext: usize = sizeof<LAYOUT>() == sizeof<Plain>() ? 32 : aCol << 2;
  for (; m >= 4; m -= 4, a += aNext, c += 32) {
    tile<Four, COLS, SIGN, LAYOUT, FINISH>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  }
  if (m == 3) tile<Three, COLS, SIGN, LAYOUT, FINISH>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  else if (m == 2) tile<Two, COLS, SIGN, LAYOUT, FINISH>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
  else if (m == 1) tile<One, COLS, SIGN, LAYOUT, FINISH>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, r0, r1, r2, r3);
}
