// Plain scalar loops with the summation order that the headers of assembly/dense promise. The arithmetic of JavaScript is that of
// the kernel's plain build (f64, round to nearest, no fusion), so the two must agree in every bit. Addresses are element indices.

export type Mode = 0 | 1 | 2 | 3;
export const modes: readonly Mode[] = [0, 1, 2, 3];
const fresh = (mode: Mode) => (mode & 1) === 0;
const sign = (mode: Mode) => (mode >= 2 ? -1 : 1);

/** How a twin sees an arena: reads and recorded writes, so that a test knows which entries a call may touch. */
export class Cells {
  readonly touched = new Set<number>();
  constructor(readonly values: Float64Array) {}
  at = (index: number): number => this.values[index]!;
  set(index: number, value: number): void {
    this.values[index] = value;
    this.touched.add(index);
  }
}

function entryOf(v: Cells, mode: Mode, c: number, k: number, term: (p: number) => number): void {
  let s = fresh(mode) ? 0 : v.at(c);
  for (let p = 0; p < k; p += 1) s += sign(mode) * term(p);
  v.set(c, s);
}

export function multiply(
  v: Cells,
  m: number,
  n: number,
  k: number,
  a: number,
  lda: number,
  b: number,
  bRow: number,
  bCol: number,
  c: number,
  ldc: number,
  mode: Mode,
): void {
  for (let j = 0; j < n; j += 1)
    for (let i = 0; i < m; i += 1) entryOf(v, mode, c + i + j * ldc, k, (p) => v.at(a + i + p * lda) * v.at(b + p * bRow + j * bCol));
}

export function multiplyTransposed(
  v: Cells,
  m: number,
  n: number,
  k: number,
  a: number,
  lda: number,
  b: number,
  ldb: number,
  c: number,
  ldc: number,
  mode: Mode,
): void {
  for (let j = 0; j < n; j += 1)
    for (let i = 0; i < m; i += 1) entryOf(v, mode, c + i + j * ldc, k, (p) => v.at(a + p + i * lda) * v.at(b + p + j * ldb));
}

export function multiplyTransposedLower(
  v: Cells,
  w: number,
  m: number,
  a: number,
  lda: number,
  b: number,
  ldb: number,
  c: number,
  ldc: number,
  mode: Mode,
): void {
  for (let j = 0; j < w; j += 1)
    for (let i = j; i < w; i += 1) entryOf(v, mode, c + i + j * ldc, m, (p) => v.at(a + p + i * lda) * v.at(b + p + j * ldb));
}

export function rankUpdateLower(v: Cells, n: number, k: number, a: number, lda: number, c: number, ldc: number, mode: Mode): void {
  for (let j = 0; j < n; j += 1)
    for (let i = j; i < n; i += 1) entryOf(v, mode, c + i + j * ldc, k, (p) => v.at(a + i + p * lda) * v.at(a + j + p * lda));
}

export function factorPanel(
  v: Cells,
  rows: number,
  width: number,
  panel: number,
  ld: number,
  floors: number,
  from = 0,
  to = width,
): number {
  for (let j = from; j < to; j += 1) {
    let reciprocal = 0;
    for (let i = j; i < rows; i += 1) {
      let s = v.at(panel + i + j * ld);
      for (let p = 0; p < j; p += 1) s -= v.at(panel + i + p * ld) * v.at(panel + j + p * ld);
      if (i === j) {
        if (!(s > v.at(floors + j))) return 1 + j;
        v.set(panel + i + j * ld, Math.sqrt(s));
        reciprocal = Math.sqrt(s) * (1 / s);
      } else v.set(panel + i + j * ld, s * reciprocal);
    }
  }
  return 0;
}

export function solveRightTransposed(v: Cells, m: number, w: number, l: number, ldl: number, b: number, ldb: number): void {
  for (let j = 0; j < w; j += 1)
    for (let i = 0; i < m; i += 1) {
      let s = v.at(b + i + j * ldb);
      for (let p = 0; p < j; p += 1) s -= v.at(b + i + p * ldb) * v.at(l + j + p * ldl);
      v.set(b + i + j * ldb, s * (1 / v.at(l + j + j * ldl)));
    }
}

export function solveRight(v: Cells, m: number, w: number, l: number, ldl: number, b: number, ldb: number): void {
  for (let j = w - 1; j >= 0; j -= 1)
    for (let i = 0; i < m; i += 1) {
      let s = v.at(b + i + j * ldb);
      for (let p = w - 1; p > j; p -= 1) s -= v.at(b + i + p * ldb) * v.at(l + p + j * ldl);
      v.set(b + i + j * ldb, s * (1 / v.at(l + j + j * ldl)));
    }
}

export function solveLowerMany(v: Cells, w: number, n: number, l: number, ld: number, x: number, ldx: number): void {
  for (let j = 0; j < n; j += 1)
    for (let i = 0; i < w; i += 1) {
      let s = v.at(x + i + j * ldx);
      for (let p = 0; p < i; p += 1) s -= v.at(x + p + j * ldx) * v.at(l + i + p * ld);
      v.set(x + i + j * ldx, s / v.at(l + i + i * ld));
    }
}

/** Strips of four unknowns from the end: what lies below a strip in rising order, then the strip's own terms from its last. */
export function solveLowerTransposedMany(v: Cells, w: number, n: number, l: number, ld: number, x: number, ldx: number): void {
  for (let j = 0; j < n; j += 1)
    for (let i = w - 1; i >= 0; i -= 1) {
      const next = Math.min((i & ~3) + 4, w);
      let s = v.at(x + i + j * ldx);
      for (let p = next; p < w; p += 1) s -= v.at(x + p + j * ldx) * v.at(l + p + i * ld);
      for (let p = next - 1; p > i; p -= 1) s -= v.at(x + p + j * ldx) * v.at(l + p + i * ld);
      v.set(x + i + j * ldx, s / v.at(l + i + i * ld));
    }
}

export function dot(v: Cells, n: number, a: number, b: number): number {
  const lane = [0, 0];
  for (let k = 0; k < n; k += 1) lane[k & 1]! += v.at(a + k) * v.at(b + k);
  return lane[0]! + lane[1]!;
}

export function axpy(v: Cells, n: number, alpha: number, x: number, y: number): void {
  for (let k = 0; k < n; k += 1) v.set(y + k, v.at(y + k) + alpha * v.at(x + k));
}

export function subtractProduct(v: Cells, m: number, w: number, a: number, lda: number, x: number, y: number): void {
  multiply(v, m, 1, w, a, lda, x, 1, 0, y, 0, 3);
}

export function subtractTransposedProduct(v: Cells, m: number, w: number, a: number, lda: number, y: number, x: number): void {
  for (let j = 0; j < w; j += 1) v.set(x + j, v.at(x + j) - dot(v, m, a + j * lda, y));
}

export const solveLower = (v: Cells, w: number, l: number, ld: number, x: number): void => solveLowerMany(v, w, 1, l, ld, x, 0);

export function solveLowerTransposed(v: Cells, w: number, l: number, ld: number, x: number): void {
  for (let i = w - 1; i >= 0; i -= 1) {
    const next = Math.min((i & ~3) + 4, w);
    let s = v.at(x + i);
    if (next < w) s -= dot(v, w - next, l + next + i * ld, x + next);
    for (let p = next - 1; p > i; p -= 1) s -= v.at(x + p) * v.at(l + p + i * ld);
    v.set(x + i, s / v.at(l + i + i * ld));
  }
}

export function mirror(v: Cells, n: number, c: number, ldc: number): void {
  for (let j = 0; j < n; j += 1) for (let i = j + 1; i < n; i += 1) v.set(c + j + i * ldc, v.at(c + i + j * ldc));
}

export function transposeInto(v: Cells, m: number, n: number, a: number, lda: number, b: number, ldb: number): void {
  for (let j = 0; j < n; j += 1) for (let i = 0; i < m; i += 1) v.set(b + j + i * ldb, v.at(a + i + j * lda));
}
