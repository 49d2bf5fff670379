/** Orthogonal triangularization of a dense block by Householder reflections in blocks, the reflections not kept.
 *
 *  a: m × n, column-major. The first `steps` columns, steps ≤ min(m, n), become R: upper triangular, its diagonal ≥ 0, exact zeros
 *  below. The other n − steps columns (right-hand sides, or what goes on to a parent) are carried along: Qᵀ times them.
 *  scratch: householderScratch(m, n) bytes. Entries should lie between 1e−150 and 1e150 in size, or be zero: squares must hold.
 *  Cost 2·steps²·(m − steps/3) flops, and 4·(m − steps/2)·steps for each column carried along.
 *  The norm of column j of R is that of column j of A, so r[j, j] against it shows how much of the column was new.
 *  The sign of a reflection is the one that adds (v₀ = x₀ + sign(x₀)·‖x‖), and rows of R are turned positive at the end: with the other
 *  sign, rows of very different size would lose the accuracy they keep when sorted by size (Cox, Higham 1998, "Stability of
 *  Householder QR Factorization for Weighted Least Squares Problems").
 *  With V the vectors of a block, H₁H₂… = I − V T Vᵀ, T upper triangular, its diagonal 2 ÷ ‖v‖²; a block is halved down to four
 *  columns. Few columns are reflected one by one.
 *  Source: Schreiber, Van Loan (1989), "A Storage-Efficient WY Representation for Products of Householder Transformations", SIAM J.
 *  Sci. Stat. Comput. 10(1); Elmroth, Gustavson (2000), "Applying Recursion to Serial and Parallel QR Factorization", IBM J. Res.
 *  Dev. 44(4); Golub, Van Loan, Matrix Computations, section 5.2. */
import { f64At, setF64 } from "../memory/access";
import { ASSIGN, bytes, entry, NEGATE, SUBTRACT } from "./mode";
import { multiply } from "./multiply";
import { multiplyTransposed } from "./multiply-transposed";
import { subtractTransposedProduct } from "./vector";

/** Columns reflected together before the rest is updated. */
const BLOCK = 32;

/** Up to so many columns in all are reflected one by one: 60 × 24 in 7.0 µs against 7.7 in blocks; 100 × 48 in 41 against 36. */
const FEW = 24;

/** Bytes of scratch: V, T, two products with V, signs. */
export function householderScratch(m: i32, n: i32): usize {
  return (<usize>(m + BLOCK + 2 * n) * BLOCK + <usize>n) << 3;
}

/** Short runs: a call to the host's fill costs more than these up to some dozens of entries. */
function clear(at: usize, n: i32): void {
  for (let i = 0; i < n; ++i) setF64(at, i, 0);
}

/** The reflection of x, length m ≥ 1, onto its first entry, carried out on the `later` columns that follow x. x becomes the vector v,
 *  work[0] what the first entry of x becomes; returns 2 ÷ ‖v‖², or 0 for x = 0. work f64[later + 1]. */
function reflect(m: i32, later: i32, x: usize, ldx: i32, work: usize): f64 {
  clear(work, later + 1);
  subtractTransposedProduct(m - 1, later + 1, x + 8, ldx, x + 8, work); // x below its first entry times itself and what follows
  const x0 = load<f64>(x), norm = Math.sqrt(x0 * x0 - load<f64>(work));
  setF64(work, 0, x0 > 0 ? -norm : norm);
  if (norm == 0) return 0;
  const v0 = x0 > 0 ? x0 + norm : x0 - norm, tau = 1 / (norm * (norm + Math.abs(x0)));
  store<f64>(x, v0);
  for (let q = 1; q <= later; ++q) setF64(work, q, tau * (v0 * load<f64>(entry(x, ldx, 0, q)) - f64At(work, q)));
  multiply(m, later, 1, x, ldx, work + 8, 1, 1, x + bytes(ldx), ldx, SUBTRACT);
  return tau;
}

/** C := (I − V T Vᵀ)ᵀ C with V m × w, C m × n. work f64[2·w·n]. */
function apply(m: i32, w: i32, v: usize, ldv: i32, t: usize, ldt: i32, n: i32, c: usize, ldc: i32, work: usize): void {
  const turned = work + bytes(w * n);
  multiplyTransposed(w, n, m, v, ldv, c, ldc, work, w, ASSIGN);
  multiplyTransposed(w, n, w, t, ldt, work, w, turned, w, ASSIGN);
  multiply(m, n, w, v, ldv, turned, 1, w, c, ldc, SUBTRACT);
}

/** Triangularizes w ≤ 4 columns one by one; V and T as above, entries above the diagonal of V and below that of T are zero before. */
function reduceColumns(m: i32, w: i32, a: usize, lda: i32, v: usize, ldv: i32, t: usize, ldt: i32, work: usize): void {
  for (let j = 0; j < w; ++j) {
    const x = entry(a, lda, j, j), vj = entry(v, ldv, j, j), rows = m - j, tj = entry(t, ldt, 0, j);
    const tau = reflect(rows, w - j - 1, x, lda, work);
    setF64(tj, j, tau);
    if (tau == 0) continue; // v stays zero
    for (let i = 0; i < rows; ++i) setF64(vj, i, f64At(x, i));
    setF64(x, 0, f64At(work, 0));
    clear(x + 8, rows - 1);
    // Column j of T above its diagonal: −τ·T·(Vᵀ v).
    clear(work, j);
    subtractTransposedProduct(rows, j, v + bytes(j), ldv, vj, work);
    for (let i = 0; i < j; ++i) {
      let s = 0.0;
      for (let q = i; q < j; ++q) s += load<f64>(entry(t, ldt, i, q)) * f64At(work, q);
      setF64(tj, i, tau * s);
    }
  }
}

function reduceBlock(m: i32, w: i32, a: usize, lda: i32, v: usize, ldv: i32, t: usize, ldt: i32, work: usize): void {
  if (w <= 4) { reduceColumns(m, w, a, lda, v, ldv, t, ldt, work); return; }
  const w1 = (w + 7 >> 3) << 2, w2 = w - w1;
  reduceBlock(m, w1, a, lda, v, ldv, t, ldt, work);
  apply(m, w1, v, ldv, t, ldt, w2, entry(a, lda, 0, w1), lda, work);
  const v2 = entry(v, ldv, w1, w1), t2 = entry(t, ldt, w1, w1), t12 = entry(t, ldt, 0, w1);
  reduceBlock(m - w1, w2, entry(a, lda, w1, w1), lda, v2, ldv, t2, ldt, work);
  // T₁₂ = −T₁·(V₁ᵀV₂)·T₂
  multiplyTransposed(w1, w2, m - w1, v + bytes(w1), ldv, v2, ldv, work, w1, ASSIGN);
  multiply(w1, w2, w2, work, w1, t2, 1, ldt, t12, ldt, ASSIGN);
  multiply(w1, w2, w1, t, ldt, t12, 1, ldt, work, w1, NEGATE);
  for (let j = 0; j < w2; ++j) memory.copy(entry(t12, ldt, 0, j), work + bytes(j * w1), bytes(w1));
}

export function triangularize(m: i32, n: i32, steps: i32, a: usize, lda: i32, scratch: usize): void {
  assert(steps <= m && steps <= n, "no more steps than rows and columns");
  const v = scratch, t = v + bytes(m * BLOCK), work = t + bytes(BLOCK * BLOCK), sign = work + bytes(2 * BLOCK * n);
  if (n <= FEW) {
    for (let j = 0; j < steps; ++j) {
      const x = entry(a, lda, j, j);
      reflect(m - j, n - j - 1, x, lda, work);
      setF64(x, 0, f64At(work, 0));
      clear(x + 8, m - j - 1);
    }
  } else for (let j = 0; j < steps; j += BLOCK) {
    const w = min(BLOCK, steps - j), rows = m - j, rest = n - j - w;
    memory.fill(v, 0, bytes(rows * w));
    memory.fill(t, 0, bytes(BLOCK * w));
    reduceBlock(rows, w, entry(a, lda, j, j), lda, v, rows, t, BLOCK, work);
    if (rest) apply(rows, w, v, rows, t, BLOCK, rest, entry(a, lda, j, j + w), lda, work);
  }
  for (let i = 0; i < steps; ++i) setF64(sign, i, load<f64>(entry(a, lda, i, i)) < 0 ? -1 : 1);
  for (let j = 0; j < n; ++j) {
    const column = entry(a, lda, 0, j), end = min(j + 1, steps);
    for (let i = 0; i < end; ++i) setF64(column, i, f64At(column, i) * f64At(sign, i));
  }
}
