/** Cholesky factorization of the panel of a supernode: the top width × width square P₁ = L₁L₁ᵀ, the rows below P₂ := P₂L₁⁻ᵀ.
 *  panel: rows × width, rows ≥ width, column-major, leading dimension ld; entries above the diagonal of the top square are not
 *  touched. Columns [0, from) must be done; columns [from, to) are done on return. So long panels are cut by columns.
 *  floors f64[width]: a pivot ≤ floors[j], outside [2^−1022, 2^1022], or NaN, stops the work.
 *  Returns 0, or 1 + j of the pivot that stopped it; the pivot then stands in its place, the rest of [from, to) is undefined.
 *  Cost of all columns: width³/3 + (rows − width)·width² flops. Entry (i, j) takes away its terms in the order p = 0, 1, … and is
 *  multiplied by the reciprocal of the pivot's root last, however the columns are cut.
 *  Source: Ng, Peyton (1993), "Block Sparse Cholesky Algorithms on Advanced Uniprocessor Computers", SIAM J. Sci. Comput. 14(5);
 *  Golub, Van Loan, Matrix Computations, section 4.2 (left-looking form). */
import { bytes, entry, SUBTRACT } from "./mode";
import { multiply } from "./multiply";
import { rankUpdateLower, subtractTriangle } from "./rank-update";
import { solveStrip } from "./solve-right";

/** Columns that are done strip by strip before a block update; 48 to 192 differ by less than 5 %. */
const BLOCK = 96;
const SMALLEST: u64 = 0x0010000000000000; // the bits of 2^−1022
const LARGEST: u64 = 0x7fd0000000000000; // the bits of 2^1022
const reciprocals = memory.data(32, 16);

/** The reciprocal of a usable pivot neither overflows nor loses digits. Bits of positive numbers are ordered like the numbers, and one
 *  comparison of bits keeps out signs and NaN as well: a panel of order 6 took 42 ns with it and 54 with two comparisons of numbers. */
// @ts-ignore: decorator
@inline function usable(pivot: f64, floor: f64): bool { return pivot > floor && reinterpret<u64>(pivot) - SMALLEST <= LARGEST - SMALLEST; }

/** The lower triangle of order w ≤ 4 at `at`; leaves the reciprocals of the diagonal of L. 0, or 1 + the pivot that stopped it.
 *  The reciprocal of the root of p is taken as √p·(1 ÷ p), so that root and division run side by side: panels of 3 to 24 columns
 *  take 15 to 25 % less time than with 1 ÷ √p, for two roundings more. */
function factorTile(w: i32, at: usize, ld: usize, floors: usize): i32 {
  const p0 = load<f64>(at);
  if (!usable(p0, load<f64>(floors))) return 1;
  const d0 = Math.sqrt(p0), r0 = d0 * (1 / p0);
  store<f64>(at, d0);
  store<f64>(reciprocals, r0);
  if (w == 1) return 0;
  const l10 = load<f64>(at, 8) * r0, p1 = load<f64>(at + ld, 8) - l10 * l10;
  store<f64>(at, l10, 8);
  store<f64>(at + ld, p1, 8);
  if (!usable(p1, load<f64>(floors, 8))) return 2;
  const d1 = Math.sqrt(p1), r1 = d1 * (1 / p1);
  store<f64>(at + ld, d1, 8);
  store<f64>(reciprocals, r1, 8);
  if (w == 2) return 0;
  const l20 = load<f64>(at, 16) * r0, l21 = (load<f64>(at + ld, 16) - l20 * l10) * r1;
  const p2 = load<f64>(at + 2 * ld, 16) - l20 * l20 - l21 * l21;
  store<f64>(at, l20, 16);
  store<f64>(at + ld, l21, 16);
  store<f64>(at + 2 * ld, p2, 16);
  if (!usable(p2, load<f64>(floors, 16))) return 3;
  const d2 = Math.sqrt(p2), r2 = d2 * (1 / p2);
  store<f64>(at + 2 * ld, d2, 16);
  store<f64>(reciprocals, r2, 16);
  if (w == 3) return 0;
  const l30 = load<f64>(at, 24) * r0, l31 = (load<f64>(at + ld, 24) - l30 * l10) * r1;
  const l32 = (load<f64>(at + 2 * ld, 24) - l30 * l20 - l31 * l21) * r2;
  const p3 = load<f64>(at + 3 * ld, 24) - l30 * l30 - l31 * l31 - l32 * l32;
  store<f64>(at, l30, 24);
  store<f64>(at + ld, l31, 24);
  store<f64>(at + 2 * ld, l32, 24);
  store<f64>(at + 3 * ld, p3, 24);
  if (!usable(p3, load<f64>(floors, 24))) return 4;
  const d3 = Math.sqrt(p3);
  store<f64>(at + 3 * ld, d3, 24);
  store<f64>(reciprocals, d3 * (1 / p3), 24);
  return 0;
}

export function factorPanel(rows: i32, width: i32, panel: usize, ld: i32, floors: usize, from: i32, to: i32): i32 {
  assert(rows >= width && to <= width, "the panel is a lower trapezoid");
  const col = bytes(ld);
  for (let block = from; block < to; block += BLOCK) {
    const end = min(block + BLOCK, to), done = panel + <usize>block * col;
    if (block) { // what the columns before the block take away
      const target = done + bytes(block), below = panel + bytes(end);
      rankUpdateLower(end - block, block, panel + bytes(block), ld, target, ld, SUBTRACT);
      multiply(rows - end, end - block, block, below, ld, panel + bytes(block), ld, 1, entry(done, ld, end, 0), ld, SUBTRACT);
    }
    for (let j = block; j < end; j += 4) {
      const w = min(4, end - j), k = j - block, left = done + bytes(j), square = entry(panel, ld, j, j);
      if (k) subtractTriangle(false, w, k, left, col, square, col);
      const stopped = factorTile(w, square, col, floors + bytes(j));
      if (stopped) return j + stopped;
      if (rows > j + w) solveStrip(w, rows - j - w, k, left + bytes(w), col, left, col, 8, square + bytes(w), col, reciprocals);
    }
  }
  return 0;
}
