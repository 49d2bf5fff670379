/** Products of a matrix with one vector, column-major, f64 throughout.
 *  Source: Golub, Van Loan, Matrix Computations, section 1.1 (the column form and the dot form). */
import { f64At } from "../memory/access";
import { madd, nmadd } from "./madd";
import { bytes } from "./mode";
import { Four, One, Three, Two } from "./tile";

// @ts-ignore: decorator
@inline function lanes(v: v128): f64 { return f64x2.extract_lane(v, 0) + f64x2.extract_lane(v, 1); }

/** Σ a[i]·b[i]: even i in lane 0, odd i in lane 1, lanes added once at the end (an odd last term is in lane 0). */
export function dot(n: i32, a: usize, b: usize): f64 {
  let s = f64x2.splat(0);
  for (const end = a + bytes(n & ~1); a != end; a += 16, b += 16) s = madd(v128.load(a), v128.load(b), s);
  if (n & 1) s = madd(v128.load64_zero(a), v128.load64_zero(b), s);
  return lanes(s);
}

/** y := y + alpha·x, length n. */
export function axpy(n: i32, alpha: f64, x: usize, y: usize): void {
  const s = f64x2.splat(alpha);
  for (const end = x + bytes(n & ~1); x != end; x += 16, y += 16) v128.store(y, madd(s, v128.load(x), v128.load(y)));
  if (n & 1) v128.store64_lane(y, madd(s, v128.load64_zero(x), v128.load64_zero(y)), 0);
}

/** COLS columns of y := y − A·x. */
// @ts-ignore: decorator
@inline function subtractColumns<COLS>(m: i32, a: usize, col: usize, x: usize, y: usize): void {
  const a1 = col, a2 = col << 1, a3 = a1 + a2;
  const x0 = v128.load64_splat(x);
  let x1 = x0, x2 = x0, x3 = x0;
  if (sizeof<COLS>() >= sizeof<Two>()) x1 = v128.load64_splat(x, 8);
  if (sizeof<COLS>() >= sizeof<Three>()) x2 = v128.load64_splat(x, 16);
  if (sizeof<COLS>() >= sizeof<Four>()) x3 = v128.load64_splat(x, 24);
  for (const end = y + bytes(m & ~1); y != end; y += 16, a += 16) {
    let s = nmadd(v128.load(a), x0, v128.load(y));
    if (sizeof<COLS>() >= sizeof<Two>()) s = nmadd(v128.load(a + a1), x1, s);
    if (sizeof<COLS>() >= sizeof<Three>()) s = nmadd(v128.load(a + a2), x2, s);
    if (sizeof<COLS>() >= sizeof<Four>()) s = nmadd(v128.load(a + a3), x3, s);
    v128.store(y, s);
  }
  if (m & 1) {
    let s = nmadd(v128.load64_zero(a), x0, v128.load64_zero(y));
    if (sizeof<COLS>() >= sizeof<Two>()) s = nmadd(v128.load64_zero(a + a1), x1, s);
    if (sizeof<COLS>() >= sizeof<Three>()) s = nmadd(v128.load64_zero(a + a2), x2, s);
    if (sizeof<COLS>() >= sizeof<Four>()) s = nmadd(v128.load64_zero(a + a3), x3, s);
    v128.store64_lane(y, s, 0);
  }
}

/** y := y − A·x with A m × w, x of length w, y of length m. Each entry takes its terms in the order of the columns. */
export function subtractProduct(m: i32, w: i32, a: usize, lda: i32, x: usize, y: usize): void {
  const col = bytes(lda);
  for (; w >= 4; w -= 4, a += 4 * col, x += 32) subtractColumns<Four>(m, a, col, x, y);
  if (w == 3) subtractColumns<Three>(m, a, col, x, y);
  else if (w == 2) subtractColumns<Two>(m, a, col, x, y);
  else if (w == 1) subtractColumns<One>(m, a, col, x, y);
}

/** COLS entries of x := x − Aᵀ·y. */
// @ts-ignore: decorator
@inline function subtractDots<COLS>(m: i32, a: usize, col: usize, y: usize, x: usize): void {
  const a1 = col, a2 = col << 1, a3 = a1 + a2;
  let s0 = f64x2.splat(0), s1 = s0, s2 = s0, s3 = s0;
  for (const end = y + bytes(m & ~1); y != end; y += 16, a += 16) {
    const t = v128.load(y);
    s0 = madd(v128.load(a), t, s0);
    if (sizeof<COLS>() >= sizeof<Two>()) s1 = madd(v128.load(a + a1), t, s1);
    if (sizeof<COLS>() >= sizeof<Three>()) s2 = madd(v128.load(a + a2), t, s2);
    if (sizeof<COLS>() >= sizeof<Four>()) s3 = madd(v128.load(a + a3), t, s3);
  }
  if (m & 1) {
    const t = v128.load64_zero(y);
    s0 = madd(v128.load64_zero(a), t, s0);
    if (sizeof<COLS>() >= sizeof<Two>()) s1 = madd(v128.load64_zero(a + a1), t, s1);
    if (sizeof<COLS>() >= sizeof<Three>()) s2 = madd(v128.load64_zero(a + a2), t, s2);
    if (sizeof<COLS>() >= sizeof<Four>()) s3 = madd(v128.load64_zero(a + a3), t, s3);
  }
  store<f64>(x, load<f64>(x) - lanes(s0));
  if (sizeof<COLS>() >= sizeof<Two>()) store<f64>(x, load<f64>(x, 8) - lanes(s1), 8);
  if (sizeof<COLS>() >= sizeof<Three>()) store<f64>(x, load<f64>(x, 16) - lanes(s2), 16);
  if (sizeof<COLS>() >= sizeof<Four>()) store<f64>(x, load<f64>(x, 24) - lanes(s3), 24);
}

/** x := x − Aᵀ·y with A m × w, y of length m, x of length w. Each sum runs as in `dot` and is taken away at the end. */
export function subtractTransposedProduct(m: i32, w: i32, a: usize, lda: i32, y: usize, x: usize): void {
  const col = bytes(lda);
  for (; w >= 4; w -= 4, a += 4 * col, x += 32) subtractDots<Four>(m, a, col, y, x);
  if (w == 3) subtractDots<Three>(m, a, col, y, x);
  else if (w == 2) subtractDots<Two>(m, a, col, y, x);
  else if (w == 1) subtractDots<One>(m, a, col, y, x);
}
