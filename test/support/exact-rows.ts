// Small least-squares problems from their rows in double-double arithmetic: modified Gram–Schmidt, which takes R from the rows without
// squaring their condition (Björck, "Solving linear least squares problems by Gram-Schmidt orthogonalization", BIT 7, 1967).
import { add, type DoubleDouble, divide, multiply, squareRoot, subtract, zero } from "./double-double.js";

export interface ExactRows {
  /** √w J, R and R⁻¹, (JᵀWJ)⁻¹, row by row, and the solution of J x ≈ b. */
  rows: number[][];
  triangle: number[][];
  inverseTriangle: number[][];
  cofactors: number[][];
  solution: number[];
}

const sumOf = (terms: readonly DoubleDouble[]): DoubleDouble => terms.reduce(add, zero);
const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

export function exactRows(jacobian: readonly (readonly number[])[], weights: readonly number[], right: readonly number[]): ExactRows {
  const n = jacobian[0]!.length;
  const roots = weights.map((w) => squareRoot([w, 0]));
  const a = jacobian.map((row, i) => row.map((v) => multiply(roots[i]!, [v, 0])));
  const q = a.map((row, i) => [...row, multiply(roots[i]!, [right[i]!, 0])]);
  const r = upTo(n + 1).map(() => upTo(n + 1).map(() => zero));
  for (let j = 0; j < n; j += 1) {
    const norm = squareRoot(sumOf(q.map((row) => multiply(row[j]!, row[j]!))));
    r[j]![j] = norm;
    for (const row of q) row[j] = divide(row[j]!, norm);
    for (let k = j + 1; k <= n; k += 1) {
      const product = sumOf(q.map((row) => multiply(row[j]!, row[k]!)));
      r[j]![k] = product;
      for (const row of q) row[k] = subtract(row[k]!, multiply(row[j]!, product));
    }
  }
  // Columns of R⁻¹, from the diagonal up.
  const x = upTo(n).map(() => upTo(n).map(() => zero));
  for (let j = 0; j < n; j += 1) {
    for (let i = j; i >= 0; i -= 1) {
      let rest: DoubleDouble = i === j ? [1, 0] : zero;
      for (let k = i + 1; k <= j; k += 1) rest = subtract(rest, multiply(r[i]![k]!, x[k]![j]!));
      x[i]![j] = divide(rest, r[i]![i]!);
    }
  }
  const high = (matrix: readonly (readonly DoubleDouble[])[]) => matrix.map((row) => row.map(([hi]) => hi));
  return {
    rows: high(a),
    triangle: high(r.slice(0, n).map((row) => row.slice(0, n))),
    inverseTriangle: high(x),
    cofactors: high(x.map((row) => x.map((other) => sumOf(row.map((v, k) => multiply(v, other[k]!)))))),
    solution: x.map((row) => sumOf(row.map((v, k) => multiply(v, r[k]![n]!)))[0]),
  };
}
