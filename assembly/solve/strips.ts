/** A few columns of a panel at a time against right-hand sides that lie side by side: what the triangular solves are made of.
 *  Lanes run along the right-hand sides, so numbers are stored and loaded in the same pairs (a pair read back from two stores of single
 *  numbers stalls the processor) and nothing is transposed. WIDTH columns (1, 2 or 4) by PAIRS pairs of right-hand sides (1 to 4, with
 *  four columns 1 or 2), in eight accumulators at most. Shapes are types told apart by their size, as in dense/tile.ts.
 *
 *  Rows of a panel and of the gathered right-hand sides G run together: entry (i, w) of the panel lies at a + 8·i + w·aCol, pair v of
 *  row i of G at g + i·side + 16·v. The strip's own triangle is rows 0 … WIDTH − 1.
 *  Source: Golub, Van Loan, "Matrix Computations", section 3.1 (the dot form and the column form of substitution). */
import { madd, nmadd } from "../dense/madd";
import { Four, One, Three, Two } from "../dense/tile";

// @ts-ignore: decorator
@inline function reciprocal(at: usize): v128 { return f64x2.splat(1 / load<f64>(at)); }

/** One pair of the strip's own rows, given the sums over the rows below. */
// @ts-ignore: decorator
@inline
function solveUp<WIDTH>(a: usize, aCol: usize, g: usize, side: usize, r0: v128, r1: v128, r2: v128, r3: v128, s0: v128, s1: v128, s2: v128, s3: v128): void {
  const a1 = a + aCol, a2 = a1 + aCol, side2 = side << 1, side3 = side + side2;
  s0 = f64x2.sub(v128.load(g), s0);
  if (sizeof<WIDTH>() >= sizeof<Two>()) s1 = f64x2.sub(v128.load(g + side), s1);
  if (sizeof<WIDTH>() >= sizeof<Four>()) {
    const x3 = f64x2.mul(f64x2.sub(v128.load(g + side3), s3), r3);
    v128.store(g + side3, x3);
    const x2 = f64x2.mul(nmadd(v128.load64_splat(a2, 24), x3, f64x2.sub(v128.load(g + side2), s2)), r2);
    v128.store(g + side2, x2);
    s1 = nmadd(v128.load64_splat(a1, 16), x2, nmadd(v128.load64_splat(a1, 24), x3, s1));
    s0 = nmadd(v128.load64_splat(a, 16), x2, nmadd(v128.load64_splat(a, 24), x3, s0));
  }
  if (sizeof<WIDTH>() >= sizeof<Two>()) {
    const x1 = f64x2.mul(s1, r1);
    v128.store(g + side, x1);
    s0 = nmadd(v128.load64_splat(a, 8), x1, s0);
  }
  v128.store(g, f64x2.mul(s0, r0));
}

/** Lᵀ: the strip's rows of G are solved for, the `below` rows under them known. */
// @ts-ignore: decorator
@inline
function backwardStrip<WIDTH, PAIRS>(below: i32, a: usize, aCol: usize, g: usize, side: usize): void {
  const wide: usize = sizeof<WIDTH>() == sizeof<One>() ? 1 : sizeof<WIDTH>() == sizeof<Two>() ? 2 : 4;
  const zero = f64x2.splat(0), a2 = aCol << 1, a3 = aCol + a2;
  const r0 = reciprocal(a);
  let r1 = r0, r2 = r0, r3 = r0;
  if (sizeof<WIDTH>() >= sizeof<Two>()) r1 = reciprocal(a + aCol + 8);
  if (sizeof<WIDTH>() >= sizeof<Four>()) { r2 = reciprocal(a + a2 + 16); r3 = reciprocal(a + a3 + 24); }
  let s00 = zero, s01 = zero, s02 = zero, s03 = zero, s10 = zero, s11 = zero, s12 = zero, s13 = zero;
  let s20 = zero, s21 = zero, s30 = zero, s31 = zero;
  // From the last row up: the rows solved just before come last, while their numbers are still on the way.
  const end = a + 8 * wide;
  let p = end + (<usize>below << 3), x = g + (wide + <usize>below) * side;
  while (p != end) {
    p -= 8;
    x -= side;
    const x0 = v128.load(x);
    let x1 = x0, x2 = x0, x3 = x0;
    if (sizeof<PAIRS>() >= sizeof<Two>()) x1 = v128.load(x, 16);
    if (sizeof<PAIRS>() >= sizeof<Three>()) x2 = v128.load(x, 32);
    if (sizeof<PAIRS>() >= sizeof<Four>()) x3 = v128.load(x, 48);
    let u = v128.load64_splat(p);
    s00 = madd(u, x0, s00);
    if (sizeof<PAIRS>() >= sizeof<Two>()) s01 = madd(u, x1, s01);
    if (sizeof<PAIRS>() >= sizeof<Three>()) s02 = madd(u, x2, s02);
    if (sizeof<PAIRS>() >= sizeof<Four>()) s03 = madd(u, x3, s03);
    if (sizeof<WIDTH>() >= sizeof<Two>()) {
      u = v128.load64_splat(p + aCol);
      s10 = madd(u, x0, s10);
      if (sizeof<PAIRS>() >= sizeof<Two>()) s11 = madd(u, x1, s11);
      if (sizeof<PAIRS>() >= sizeof<Three>()) s12 = madd(u, x2, s12);
      if (sizeof<PAIRS>() >= sizeof<Four>()) s13 = madd(u, x3, s13);
    }
    if (sizeof<WIDTH>() >= sizeof<Four>()) {
      u = v128.load64_splat(p + a2);
      s20 = madd(u, x0, s20);
      if (sizeof<PAIRS>() >= sizeof<Two>()) s21 = madd(u, x1, s21);
      u = v128.load64_splat(p + a3);
      s30 = madd(u, x0, s30);
      if (sizeof<PAIRS>() >= sizeof<Two>()) s31 = madd(u, x1, s31);
    }
  }
  solveUp<WIDTH>(a, aCol, g, side, r0, r1, r2, r3, s00, s10, s20, s30);
  if (sizeof<PAIRS>() >= sizeof<Two>()) solveUp<WIDTH>(a, aCol, g + 16, side, r0, r1, r2, r3, s01, s11, s21, s31);
  if (sizeof<PAIRS>() >= sizeof<Three>()) solveUp<WIDTH>(a, aCol, g + 32, side, r0, r1, r2, r3, s02, s12, zero, zero);
  if (sizeof<PAIRS>() >= sizeof<Four>()) solveUp<WIDTH>(a, aCol, g + 48, side, r0, r1, r2, r3, s03, s13, zero, zero);
}

/** One pair of the strip's own rows, from what was taken from them before. */
// @ts-ignore: decorator
@inline
function solveDown<WIDTH>(a: usize, aCol: usize, g: usize, side: usize, r0: v128, r1: v128, r2: v128, r3: v128): void {
  const a1 = a + aCol, side2 = side << 1, side3 = side + side2;
  const x0 = f64x2.mul(v128.load(g), r0);
  v128.store(g, x0);
  if (sizeof<WIDTH>() >= sizeof<Two>()) {
    const x1 = f64x2.mul(nmadd(v128.load64_splat(a, 8), x0, v128.load(g + side)), r1);
    v128.store(g + side, x1);
    if (sizeof<WIDTH>() >= sizeof<Four>()) {
      const x2 = f64x2.mul(nmadd(v128.load64_splat(a1, 16), x1, nmadd(v128.load64_splat(a, 16), x0, v128.load(g + side2))), r2);
      v128.store(g + side2, x2);
      const x3 = nmadd(v128.load64_splat(a1, 24), x1, nmadd(v128.load64_splat(a, 24), x0, v128.load(g + side3)));
      v128.store(g + side3, f64x2.mul(nmadd(v128.load64_splat(a1 + aCol, 24), x2, x3), r3));
    }
  }
}

/** L: the strip's rows of G become known, and take their part from the `below` rows under them. */
// @ts-ignore: decorator
@inline
function forwardStrip<WIDTH, PAIRS>(below: i32, a: usize, aCol: usize, g: usize, side: usize): void {
  const wide: usize = sizeof<WIDTH>() == sizeof<One>() ? 1 : sizeof<WIDTH>() == sizeof<Two>() ? 2 : 4;
  const a2 = aCol << 1, a3 = aCol + a2, side2 = side << 1, side3 = side + side2;
  const r0 = reciprocal(a);
  let r1 = r0, r2 = r0, r3 = r0;
  if (sizeof<WIDTH>() >= sizeof<Two>()) r1 = reciprocal(a + aCol + 8);
  if (sizeof<WIDTH>() >= sizeof<Four>()) { r2 = reciprocal(a + a2 + 16); r3 = reciprocal(a + a3 + 24); }
  for (let v: usize = 0, pairs: usize = sizeof<PAIRS>() == sizeof<One>() ? 1 : sizeof<PAIRS>() == sizeof<Two>() ? 2 : sizeof<PAIRS>() == sizeof<Three>() ? 3 : 4; v < pairs; ++v)
    solveDown<WIDTH>(a, aCol, g + 16 * v, side, r0, r1, r2, r3);
  const x00 = v128.load(g);
  let x01 = x00, x02 = x00, x03 = x00, x10 = x00, x11 = x00, x12 = x00, x13 = x00, x20 = x00, x21 = x00, x30 = x00, x31 = x00;
  if (sizeof<PAIRS>() >= sizeof<Two>()) x01 = v128.load(g, 16);
  if (sizeof<PAIRS>() >= sizeof<Three>()) x02 = v128.load(g, 32);
  if (sizeof<PAIRS>() >= sizeof<Four>()) x03 = v128.load(g, 48);
  if (sizeof<WIDTH>() >= sizeof<Two>()) {
    x10 = v128.load(g + side);
    if (sizeof<PAIRS>() >= sizeof<Two>()) x11 = v128.load(g + side, 16);
    if (sizeof<PAIRS>() >= sizeof<Three>()) x12 = v128.load(g + side, 32);
    if (sizeof<PAIRS>() >= sizeof<Four>()) x13 = v128.load(g + side, 48);
  }
  if (sizeof<WIDTH>() >= sizeof<Four>()) {
    x20 = v128.load(g + side2);
    x30 = v128.load(g + side3);
    if (sizeof<PAIRS>() >= sizeof<Two>()) { x21 = v128.load(g + side2, 16); x31 = v128.load(g + side3, 16); }
  }
  let p = a + 8 * wide, x = g + wide * side;
  for (const end = p + (<usize>below << 3); p != end; p += 8, x += side) {
    const u = v128.load64_splat(p);
    let y0 = nmadd(u, x00, v128.load(x)), y1 = y0, y2 = y0, y3 = y0;
    if (sizeof<PAIRS>() >= sizeof<Two>()) y1 = nmadd(u, x01, v128.load(x, 16));
    if (sizeof<PAIRS>() >= sizeof<Three>()) y2 = nmadd(u, x02, v128.load(x, 32));
    if (sizeof<PAIRS>() >= sizeof<Four>()) y3 = nmadd(u, x03, v128.load(x, 48));
    if (sizeof<WIDTH>() >= sizeof<Two>()) {
      const v = v128.load64_splat(p + aCol);
      y0 = nmadd(v, x10, y0);
      if (sizeof<PAIRS>() >= sizeof<Two>()) y1 = nmadd(v, x11, y1);
      if (sizeof<PAIRS>() >= sizeof<Three>()) y2 = nmadd(v, x12, y2);
      if (sizeof<PAIRS>() >= sizeof<Four>()) y3 = nmadd(v, x13, y3);
    }
    if (sizeof<WIDTH>() >= sizeof<Four>()) {
      const v = v128.load64_splat(p + a2), w = v128.load64_splat(p + a3);
      y0 = nmadd(w, x30, nmadd(v, x20, y0));
      if (sizeof<PAIRS>() >= sizeof<Two>()) y1 = nmadd(w, x31, nmadd(v, x21, y1));
    }
    v128.store(x, y0);
    if (sizeof<PAIRS>() >= sizeof<Two>()) v128.store(x, y1, 16);
    if (sizeof<PAIRS>() >= sizeof<Three>()) v128.store(x, y2, 32);
    if (sizeof<PAIRS>() >= sizeof<Four>()) v128.store(x, y3, 48);
  }
}

function backwardColumns<PAIRS>(width: i32, rows: i32, panel: usize, aCol: usize, g: usize, side: usize): void {
  let j = width;
  if (sizeof<PAIRS>() <= sizeof<Two>()) {
    for (; j >= 4; j -= 4) backwardStrip<Four, PAIRS>(rows - j, panel + <usize>(j - 4) * (aCol + 8), aCol, g + <usize>(j - 4) * side, side);
  }
  for (; j >= 2; j -= 2) backwardStrip<Two, PAIRS>(rows - j, panel + <usize>(j - 2) * (aCol + 8), aCol, g + <usize>(j - 2) * side, side);
  if (j) backwardStrip<One, PAIRS>(rows - 1, panel, aCol, g, side);
}

function forwardColumns<PAIRS>(width: i32, rows: i32, panel: usize, aCol: usize, g: usize, side: usize): void {
  let j = 0;
  if (sizeof<PAIRS>() <= sizeof<Two>()) {
    for (; j + 4 <= width; j += 4) forwardStrip<Four, PAIRS>(rows - j - 4, panel + <usize>j * (aCol + 8), aCol, g + <usize>j * side, side);
  }
  for (; j + 2 <= width; j += 2) forwardStrip<Two, PAIRS>(rows - j - 2, panel + <usize>j * (aCol + 8), aCol, g + <usize>j * side, side);
  if (j < width) forwardStrip<One, PAIRS>(rows - j - 1, panel + <usize>j * (aCol + 8), aCol, g + <usize>j * side, side);
}

/** Pairs that go together when `left` are left: two or four fill the registers, and three are better than two and one. */
// @ts-ignore: decorator
@inline function together(left: i32): i32 { return left < 4 ? left : left == 5 || left == 6 ? 3 : 4; }

/** Lᵀ of a panel of `width` columns and `rows` rows, its square included: the first `width` rows of G are solved for, the others known.
 *  Columns of the panel lie aCol bytes apart, rows of G (pairs · 2 numbers each) side bytes. */
export function backwardPanel(pairs: i32, width: i32, rows: i32, panel: usize, aCol: usize, g: usize, side: usize): void {
  while (pairs > 0) {
    const some = together(pairs);
    if (some == 1) backwardColumns<One>(width, rows, panel, aCol, g, side);
    else if (some == 2) backwardColumns<Two>(width, rows, panel, aCol, g, side);
    else if (some == 3) backwardColumns<Three>(width, rows, panel, aCol, g, side);
    else backwardColumns<Four>(width, rows, panel, aCol, g, side);
    pairs -= some;
    g += <usize>some << 4;
  }
}

/** L of a panel: the first `width` rows of G become known, and take their part from the others. */
export function forwardPanel(pairs: i32, width: i32, rows: i32, panel: usize, aCol: usize, g: usize, side: usize): void {
  while (pairs > 0) {
    const some = together(pairs);
    if (some == 1) forwardColumns<One>(width, rows, panel, aCol, g, side);
    else if (some == 2) forwardColumns<Two>(width, rows, panel, aCol, g, side);
    else if (some == 3) forwardColumns<Three>(width, rows, panel, aCol, g, side);
    else forwardColumns<Four>(width, rows, panel, aCol, g, side);
    pairs -= some;
    g += <usize>some << 4;
  }
}
