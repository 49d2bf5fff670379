// Dense symmetric matrices of a few rows, as the tests of one reading or one state need them.
import { ArgumentError, CovarianceError } from "./errors.js";

/** Row-major numbers, or rows of numbers. */
export type Matrix = ArrayLike<number> | ArrayLike<ArrayLike<number>>;

/** `rows` × `columns` values in row-major order, copied. @throws {CovarianceError} another shape, or an entry that is not finite. */
export function rowMajor(argument: string, matrix: Matrix, rows: number, columns: number): Float64Array {
  const nested = typeof matrix[0] === "object";
  const out = new Float64Array(rows * columns);
  if (matrix.length !== (nested ? rows : rows * columns))
    throw new CovarianceError(
      argument,
      `has ${matrix.length} ${nested ? "rows" : "entries"}: give ${rows} × ${columns} numbers, row after row.`,
    );
  for (let i = 0; i < rows; ++i) {
    const row = nested ? (matrix[i] as ArrayLike<number>) : undefined;
    if (row && row.length !== columns) throw new CovarianceError(argument, `has ${row.length} entries in row ${i}: give ${columns}.`);
    for (let j = 0; j < columns; ++j) {
      const value = row ? row[j]! : (matrix[i * columns + j] as number);
      if (!Number.isFinite(value))
        throw new CovarianceError(argument, `has ${value} at (${i}, ${j}): every entry must be finite.`, { value });
      out[i * columns + j] = value;
    }
  }
  return out;
}

/** An `order` × `order` symmetric matrix, row-major, copied; what asymmetry rounding left is averaged away.
 *  @throws {CovarianceError} another shape, an entry that is not finite, or halves that differ by more than 1e−9 of the diagonal. */
export function symmetricMatrix(argument: string, matrix: Matrix, order: number): Float64Array {
  const a = rowMajor(argument, matrix, order, order);
  for (let i = 0; i < order; ++i)
    for (let j = 0; j < i; ++j) {
      const lower = a[i * order + j]!;
      const upper = a[j * order + i]!;
      const scale = Math.abs(a[i * order + i]!) + Math.abs(a[j * order + j]!);
      if (Math.abs(lower - upper) > 1e-9 * scale)
        throw new CovarianceError(argument, `is not symmetric: ${lower} at (${i}, ${j}) but ${upper} at (${j}, ${i}).`);
      a[i * order + j] = a[j * order + i] = (lower + upper) / 2;
    }
  return a;
}

/** Finite numbers of a given length, copied. @throws {ArgumentError} */
export function vector(argument: string, values: ArrayLike<number>, length: number = values.length): Float64Array {
  if (values.length !== length || length === 0)
    throw new ArgumentError(`length of ${argument}`, values.length, length === 0 ? "give at least one number." : `give ${length} numbers.`);
  const out = Float64Array.from(values);
  const bad = out.findIndex((value) => !Number.isFinite(value));
  if (bad >= 0) throw new ArgumentError(`${argument}[${bad}]`, out[bad], "give finite numbers only.");
  return out;
}

/** L with A = L Lᵀ, row-major with zeros above the diagonal. Source: Golub, Van Loan, "Matrix Computations", 4.2.
 *  @throws {CovarianceError} a pivot is not above `order` · ε of its diagonal entry. */
export function choleskyOf(argument: string, a: Float64Array, order: number): Float64Array {
  const factor = new Float64Array(order * order);
  for (let j = 0; j < order; ++j)
    for (let i = j; i < order; ++i) {
      let sum = a[i * order + j]!;
      for (let k = 0; k < j; ++k) sum -= factor[i * order + k]! * factor[j * order + k]!;
      if (i > j) factor[i * order + j] = sum / factor[j * order + j]!;
      else if (sum > order * Number.EPSILON * a[i * order + i]!) factor[i * order + i] = Math.sqrt(sum);
      else
        throw new CovarianceError(
          argument,
          `is not positive definite: component ${i} has no variance of its own (pivot ${sum.toExponential(3)}). Give each component a positive variance and correlations below 1.`,
          { component: i, pivot: sum },
        );
    }
  return factor;
}

/** L⁻¹ B in place, B with `columns` columns, row-major. */
export function forwardSolve(factor: Float64Array, order: number, b: Float64Array, columns = 1): Float64Array {
  for (let i = 0; i < order; ++i)
    for (let c = 0; c < columns; ++c) {
      let sum = b[i * columns + c]!;
      for (let k = 0; k < i; ++k) sum -= factor[i * order + k]! * b[k * columns + c]!;
      b[i * columns + c] = sum / factor[i * order + i]!;
    }
  return b;
}

/** Σ vᵢ². */
export const sumOfSquares = (values: Float64Array): number => values.reduce((sum, v) => sum + v * v, 0);

/** L⁻¹ A L⁻ᵀ for symmetric A: A in the units in which L Lᵀ is the identity. */
export function whitened(factor: Float64Array, order: number, a: Float64Array): Float64Array {
  const half = transposed(forwardSolve(factor, order, Float64Array.from(a), order), order, order);
  return forwardSolve(factor, order, half, order);
}

/** The transpose of a `rows` × `columns` matrix, row-major. */
export function transposed(a: Float64Array, rows: number, columns: number): Float64Array {
  const out = new Float64Array(a.length);
  for (let i = 0; i < rows; ++i) for (let j = 0; j < columns; ++j) out[j * rows + i] = a[i * columns + j]!;
  return out;
}
