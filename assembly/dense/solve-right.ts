/** Triangular solves from the right, in place: B := B·L⁻ᵀ and B := B·L⁻¹, with L w × w lower triangular (entries above its
 *  diagonal are not read) and B m × w, both column-major. The diagonal of L must have no zero. Cost m·w² flops.
 *  Entry j of a row of B takes away its terms in the order in which they become known (p = 0, 1, … for L⁻ᵀ, p = w − 1, w − 2, …
 *  for L⁻¹) and is multiplied by the reciprocal of the diagonal entry last.
 *  Source: Goto, van de Geijn (2008), "High-Performance Implementation of the Level-3 BLAS", ACM TOMS 35(1). */
import { bytes, SUBTRACT } from "./mode";
import { multiply } from "./multiply";
import { Four, Minus, One, Plain, Solve, strip, Three, Two } from "./tile";

/** Columns solved in strips before `multiply` carries them on. */
const BLOCK = 96;
const reciprocals = memory.data(32, 16);

/** X of one strip of w ≤ 4 columns, given the k columns before it: X := (X − A·B)·L⁻ᵀ as in tile.ts, strides in bytes, m rows.
 *  reciprocal f64[w]: of the diagonal of the strip's triangle. */
export function solveStrip(
  w: i32, m: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, x: usize, xCol: usize, reciprocal: usize,
): void {
  const r0 = v128.load64_splat(reciprocal);
  if (w == 1) { strip<One, Minus, Plain, Solve>(false, m, k, a, aCol, b, bRow, bCol, x, xCol, r0, r0, r0, r0); return; }
  const r1 = v128.load64_splat(reciprocal, 8);
  if (w == 2) { strip<Two, Minus, Plain, Solve>(false, m, k, a, aCol, b, bRow, bCol, x, xCol, r0, r1, r1, r1); return; }
  const r2 = v128.load64_splat(reciprocal, 16);
  if (w == 3) { strip<Three, Minus, Plain, Solve>(false, m, k, a, aCol, b, bRow, bCol, x, xCol, r0, r1, r2, r2); return; }
  const r3 = v128.load64_splat(reciprocal, 24);
  strip<Four, Minus, Plain, Solve>(false, m, k, a, aCol, b, bRow, bCol, x, xCol, r0, r1, r2, r3);
}

/** X·Tᵀ = X for a triangle T whose entry (j, q), q ≤ j, lies at t + 8·(j·tRow + q·tCol): strides may run backwards. */
function solveColumns(m: i32, w: i32, t: usize, tRow: i32, tCol: i32, x: usize, ldx: i32): void {
  const row = bytes(tRow), col = bytes(tCol), xCol = bytes(ldx);
  for (let from = 0; from < w; from += BLOCK) {
    const to = min(from + BLOCK, w), block = x + <usize>from * xCol;
    if (from) multiply(m, to - from, from, x, ldx, t + <usize>from * row, tCol, tRow, block, ldx, SUBTRACT);
    for (let j = from; j < to; j += 4) {
      const width = min(4, to - j), k = j - from, b = t + <usize>j * row + <usize>from * col;
      let diagonal = b + <usize>k * col;
      for (let q = 0; q < width; ++q, diagonal += row + col) store<f64>(reciprocals + (<usize>q << 3), 1 / load<f64>(diagonal));
      solveStrip(width, m, k, block, xCol, b, col, row, x + <usize>j * xCol, xCol, reciprocals);
    }
  }
}

/** B := B·L⁻ᵀ */
export function solveRightTransposed(m: i32, w: i32, l: usize, ldl: i32, b: usize, ldb: i32): void {
  solveColumns(m, w, l, 1, ldl, b, ldb);
}

/** B := B·L⁻¹: with rows and columns counted from the end, the same as above. */
export function solveRight(m: i32, w: i32, l: usize, ldl: i32, b: usize, ldb: i32): void {
  const last = <usize>(w - 1);
  solveColumns(m, w, l + last * (8 + bytes(ldl)), -ldl, -1, b + last * bytes(ldb), -ldb);
}
