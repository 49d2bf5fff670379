// Loops around the dense kernels, built for the section dense of the bench alone, so that small sizes are timed without calls from JavaScript.
import { factorPanel } from "../dense/factor-panel";
import { triangularize } from "../dense/householder";
import { inverseOfProduct } from "../dense/inverse-of-product";
import { madd } from "../dense/madd";
import { multiply } from "../dense/multiply";
import { multiplyTransposed, multiplyTransposedLower } from "../dense/multiply-transposed";
import { rankUpdateLower } from "../dense/rank-update";
import { solveLower, solveLowerMany, solveLowerTransposed, solveLowerTransposedMany } from "../dense/solve-left";
import { solveRight, solveRightTransposed } from "../dense/solve-right";
import { subtractProduct, subtractTransposedProduct } from "../dense/vector";
export { allocate, release } from "../memory/heap";

/** `times` × 12 multiply-adds of two lanes in twelve independent sums (48 flops a round): the most this CPU gives WebAssembly. */
export function peak(times: i32): f64 {
  const a = f64x2.splat(1.0000001), b = f64x2.splat(1e-9);
  let c0 = a, c1 = b, c2 = a, c3 = b, c4 = a, c5 = b, c6 = a, c7 = b, c8 = a, c9 = b, c10 = a, c11 = b;
  for (let t = 0; t < times; ++t) {
    c0 = madd(a, b, c0); c1 = madd(a, b, c1); c2 = madd(a, b, c2); c3 = madd(a, b, c3);
    c4 = madd(a, b, c4); c5 = madd(a, b, c5); c6 = madd(a, b, c6); c7 = madd(a, b, c7);
    c8 = madd(a, b, c8); c9 = madd(a, b, c9); c10 = madd(a, b, c10); c11 = madd(a, b, c11);
  }
  c0 = f64x2.add(f64x2.add(f64x2.add(c0, c1), f64x2.add(c2, c3)), f64x2.add(f64x2.add(c4, c5), f64x2.add(c6, c7)));
  c0 = f64x2.add(c0, f64x2.add(f64x2.add(c8, c9), f64x2.add(c10, c11)));
  return f64x2.extract_lane(c0, 0) + f64x2.extract_lane(c0, 1);
}

export function multiplyTimes(
  times: i32, m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, bRow: i32, bCol: i32, c: usize, ldc: i32, mode: i32,
): void {
  for (let t = 0; t < times; ++t) multiply(m, n, k, a, lda, b, bRow, bCol, c, ldc, mode);
}
export function multiplyTransposedTimes(
  times: i32, m: i32, n: i32, k: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  for (let t = 0; t < times; ++t) multiplyTransposed(m, n, k, a, lda, b, ldb, c, ldc, mode);
}
export function multiplyTransposedLowerTimes(
  times: i32, w: i32, m: i32, a: usize, lda: i32, b: usize, ldb: i32, c: usize, ldc: i32, mode: i32,
): void {
  for (let t = 0; t < times; ++t) multiplyTransposedLower(w, m, a, lda, b, ldb, c, ldc, mode);
}
export function rankUpdateTimes(times: i32, n: i32, k: i32, a: usize, lda: i32, c: usize, ldc: i32, mode: i32): void {
  for (let t = 0; t < times; ++t) rankUpdateLower(n, k, a, lda, c, ldc, mode);
}
/** Each round copies the panel from `source` first. */
function copyPanel(width: i32, source: usize, panel: usize, ld: i32): void {
  for (const end = panel + (<usize>(ld * width) << 3); panel < end; panel += 16, source += 16) v128.store(panel, v128.load(source));
}
export function copyTimes(times: i32, width: i32, source: usize, panel: usize, ld: i32): void {
  for (let t = 0; t < times; ++t) copyPanel(width, source, panel, ld);
}
export function factorTimes(times: i32, rows: i32, width: i32, source: usize, panel: usize, ld: i32, floors: usize): i32 {
  let status = 0;
  for (let t = 0; t < times; ++t) {
    copyPanel(width, source, panel, ld);
    status |= factorPanel(rows, width, panel, ld, floors, 0, width);
  }
  return status;
}
export function triangularizeTimes(times: i32, rows: i32, columns: i32, source: usize, a: usize, ld: i32, ends: usize, leads: usize, scratch: usize): void {
  for (let t = 0; t < times; ++t) {
    copyPanel(rows, source, a, ld);
    triangularize(columns, a, ld, ends, 0, columns, 0, leads, scratch);
  }
}
export function solveRightTimes(times: i32, transposed: bool, m: i32, w: i32, l: usize, ldl: i32, b: usize, ldb: i32): void {
  for (let t = 0; t < times; ++t) if (transposed) solveRightTransposed(m, w, l, ldl, b, ldb); else solveRight(m, w, l, ldl, b, ldb);
}
export function solveLeftTimes(times: i32, transposed: bool, w: i32, n: i32, l: usize, ld: i32, x: usize, ldx: i32): void {
  for (let t = 0; t < times; ++t) {
    if (transposed) solveLowerTransposedMany(w, n, l, ld, x, ldx); else solveLowerMany(w, n, l, ld, x, ldx);
  }
}
export function inverseTimes(times: i32, w: i32, l: usize, ldl: i32, z: usize, ldz: i32, scratch: usize): void {
  for (let t = 0; t < times; ++t) inverseOfProduct(w, l, ldl, z, ldz, scratch);
}
/** One right-hand side through a panel: the triangle, then the rows below (forward), or the other way round (backward). */
export function vectorTimes(times: i32, backward: bool, rows: i32, w: i32, panel: usize, ld: i32, x: usize): void {
  const below = panel + (<usize>w << 3), rest = x + (<usize>w << 3);
  for (let t = 0; t < times; ++t) {
    if (backward) {
      subtractTransposedProduct(rows - w, w, below, ld, rest, x);
      solveLowerTransposed(w, panel, ld, x);
    } else {
      solveLower(w, panel, ld, x);
      subtractProduct(rows - w, w, below, ld, x, rest);
    }
  }
}
