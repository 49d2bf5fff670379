/** Copies between triangles and transposes, column-major, two by two entries at a time. */
import { f64At, setF64 } from "../memory/access";
import { bytes, entry } from "./mode";

/** The 2 × 2 square at `from`, transposed, to `to`; column strides in bytes. */
// @ts-ignore: decorator
@inline function transposeSquare(from: usize, fromCol: usize, to: usize, toCol: usize): void {
  const u = v128.load(from), v = v128.load(from + fromCol);
  v128.store(to, v128.shuffle<f64>(u, v, 0, 2));
  v128.store(to + toCol, v128.shuffle<f64>(u, v, 1, 3));
}

/** B := Aᵀ with A m × n and B n × m; they must not overlap. */
export function transposeInto(m: i32, n: i32, a: usize, lda: i32, b: usize, ldb: i32): void {
  const aCol = bytes(lda), bCol = bytes(ldb);
  let i = 0;
  for (; i + 2 <= m; i += 2) {
    let from = a + bytes(i), to = b + <usize>i * bCol, j = 0;
    for (; j + 2 <= n; j += 2, from += 2 * aCol, to += 16) transposeSquare(from, aCol, to, bCol);
    if (j < n) {
      store<f64>(to, load<f64>(from));
      store<f64>(to + bCol, load<f64>(from, 8));
    }
  }
  if (i < m) for (let j = 0; j < n; ++j) setF64(b + <usize>i * bCol, j, f64At(a + <usize>j * aCol, i));
}

/** Copies the lower triangle of C, n × n, onto the upper. */
export function mirror(n: i32, c: usize, ldc: i32): void {
  const col = bytes(ldc);
  for (let j = 0; j < n; j += 2) {
    if (j + 1 < n) store<f64>(entry(c, ldc, j, j + 1), load<f64>(entry(c, ldc, j + 1, j)));
    let from = entry(c, ldc, j + 2, j), to = entry(c, ldc, j, j + 2), i = j + 2;
    for (; i + 2 <= n; i += 2, from += 16, to += 2 * col) transposeSquare(from, col, to, col);
    if (i < n) {
      store<f64>(to, load<f64>(from));
      store<f64>(to, load<f64>(from + col), 8);
    }
  }
}
