// Eigenvalues and eigenvectors of a small symmetric matrix by cyclic Jacobi rotations: for 2 × 2 one rotation, the closed form.
// Sources: C. G. J. Jacobi, J. reine angew. Math. 30 (1846) 51; rotation of Rutishauser, Numer. Math. 9 (1966) 1 (Golub, Van Loan, 8.5).

export interface SymmetricEigen {
  /** Largest first. */
  readonly values: Float64Array;
  /** `vectors[k]` is the unit eigenvector of `values[k]`. */
  readonly vectors: readonly Float64Array[];
}

/** @param a `order` × `order`, symmetric; not modified. Cost O(order³) a sweep, rarely more than six sweeps. */
export function symmetricEigen(a: Float64Array, order: number): SymmetricEigen {
  const m = Float64Array.from(a);
  const v = new Float64Array(order * order); // row k becomes the eigenvector of diagonal entry k
  for (let k = 0; k < order; ++k) v[k * order + k] = 1;
  for (let turned = true; turned; ) {
    turned = false;
    for (let p = 0; p < order; ++p)
      for (let q = p + 1; q < order; ++q) {
        const off = m[p * order + q]!;
        // below this no diagonal entry of a positive matrix changes any more
        if (Math.abs(off) <= 1e-17 * Math.sqrt(Math.abs(m[p * order + p]! * m[q * order + q]!)) || Math.abs(off) < 1e-300) continue;
        turned = true;
        const theta = (m[q * order + q]! - m[p * order + p]!) / (2 * off);
        const t = (theta >= 0 ? 1 : -1) / (Math.abs(theta) + Math.hypot(theta, 1)); // tan of the smaller angle
        const c = 1 / Math.hypot(t, 1);
        rotate(m, order, p, q, c, t * c, t * off);
        for (let k = 0; k < order; ++k) {
          const vp = v[p * order + k]!;
          const vq = v[q * order + k]!;
          v[p * order + k] = c * (vp - t * vq);
          v[q * order + k] = c * (t * vp + vq);
        }
      }
  }
  const ranked = Array.from({ length: order }, (_, k) => k).sort((i, j) => m[j * order + j]! - m[i * order + i]!);
  return {
    values: Float64Array.from(ranked, (k) => m[k * order + k]!),
    vectors: ranked.map((k) => v.slice(k * order, (k + 1) * order)),
  };
}

/** Jᵀ M J in the plane (p, q), with `shift` = t · m[p, q] moved between the two diagonal entries. */
function rotate(m: Float64Array, order: number, p: number, q: number, c: number, s: number, shift: number): void {
  m[p * order + p]! -= shift;
  m[q * order + q]! += shift;
  m[p * order + q] = m[q * order + p] = 0;
  for (let k = 0; k < order; ++k) {
    if (k === p || k === q) continue;
    const kp = m[k * order + p]!;
    const kq = m[k * order + q]!;
    m[k * order + p] = m[p * order + k] = c * kp - s * kq;
    m[k * order + q] = m[q * order + k] = s * kp + c * kq;
  }
}
