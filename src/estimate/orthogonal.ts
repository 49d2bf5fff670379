// Columns turned orthogonal by plane rotations, without forming their products: small singular values keep their digits.

/** Sweeps that a handful of columns never needs. */
const MOST_SWEEPS = 30;

/**
 * Rotates the columns of B (rows × columns, column-major) in place until they are orthogonal, and those of Y along with them:
 * B := B V, Y := Y V. The columns' lengths are then the singular values of B.
 * @returns those lengths.
 * Cost: 6 rows columns² flops a sweep, a few sweeps. Source: Hestenes (1958); Golub, Van Loan, "Matrix Computations", section 8.6.3.
 */
export function orthogonalize(b: Float64Array, y: Float64Array, columns: number): Float64Array {
  const rows = b.length / columns;
  const height = y.length / columns;
  const lengths = new Float64Array(columns);
  for (let sweep = 0, turned = true; turned && sweep < MOST_SWEEPS; sweep += 1) {
    turned = false;
    for (let p = 0; p < columns; p += 1) {
      for (let q = p + 1; q < columns; q += 1) {
        let [pp, qq, pq] = [0, 0, 0];
        for (let i = 0; i < rows; i += 1) {
          const [u, v] = [b[p * rows + i]!, b[q * rows + i]!];
          pp += u * u;
          qq += v * v;
          pq += u * v;
        }
        if (Math.abs(pq) <= 4 * Number.EPSILON * Math.sqrt(pp * qq)) continue;
        turned = true;
        const zeta = (qq - pp) / (2 * pq);
        const t = (zeta < 0 ? -1 : 1) / (Math.abs(zeta) + Math.hypot(1, zeta));
        const c = 1 / Math.hypot(1, t);
        rotate(b, rows, p, q, c, c * t);
        rotate(y, height, p, q, c, c * t);
      }
    }
  }
  for (let p = 0; p < columns; p += 1) {
    let sum = 0;
    for (let i = 0; i < rows; i += 1) sum += b[p * rows + i]! ** 2;
    lengths[p] = Math.sqrt(sum);
  }
  return lengths;
}

function rotate(x: Float64Array, rows: number, p: number, q: number, c: number, s: number): void {
  for (let i = 0; i < rows; i += 1) {
    const [u, v] = [x[p * rows + i]!, x[q * rows + i]!];
    x[p * rows + i] = c * u - s * v;
    x[q * rows + i] = s * u + c * v;
  }
}

/** Makes the columns of X (rows × columns, column-major) orthonormal in place; a column becomes zero when those before it
 *  leave no more of its length than the share `tolerance`.
 *  Gram–Schmidt, twice, which is enough (Giraud, Langou, Rozložník 2005). Returns how many are left. */
export function orthonormalize(x: Float64Array, columns: number, tolerance = 1e-12): number {
  const rows = x.length / columns;
  let rank = 0;
  for (let q = 0; q < columns; q += 1) {
    const before = norm(x, q * rows, rows);
    for (let pass = 0; pass < 2; pass += 1) for (let p = 0; p < q; p += 1) subtractProjection(x, p, q, rows);
    const after = norm(x, q * rows, rows);
    const depends = !(after > tolerance * before);
    for (let i = 0; i < rows; i += 1) x[q * rows + i] = depends ? 0 : x[q * rows + i]! / after;
    if (!depends) rank += 1;
  }
  return rank;
}

function subtractProjection(x: Float64Array, p: number, q: number, rows: number): void {
  let sum = 0;
  for (let i = 0; i < rows; i += 1) sum += x[p * rows + i]! * x[q * rows + i]!;
  for (let i = 0; i < rows; i += 1) x[q * rows + i]! -= sum * x[p * rows + i]!;
}

export function norm(x: Float64Array, from = 0, length: number = x.length): number {
  let sum = 0;
  for (let i = from; i < from + length; i += 1) sum += x[i]! * x[i]!;
  return Math.sqrt(sum);
}
