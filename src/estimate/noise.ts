// The noise of a measurement as a root of its covariance R = B Bᵀ, with which rows are whitened (B⁻¹ J) and given back their units (B v).
import {
  MeasurementNotFiniteError,
  MeasurementShapeError,
  NoiseFormError,
  NoiseNotPositiveDefiniteError,
  NoiseNotSymmetricError,
  StandardDeviationError,
} from "./errors.js";
import { type Matrix, matrixInto } from "./small-matrix.js";

/** Exactly one of the three. */
export interface Noise {
  /** R, rows × rows. */
  readonly covariance?: Matrix | undefined;
  /** √ of R's diagonal, one a row, when the rows' errors are independent. */
  readonly standardDeviations?: ArrayLike<number> | undefined;
  /** R⁻¹, rows × rows. */
  readonly information?: Matrix | undefined;
}

/** Noise, checked. */
export interface NoiseRoot {
  readonly form: "standardDeviations" | "covariance" | "information";
  /** The deviations (length rows), or the lower Cholesky factor C, rows × rows, row-major, of the matrix that was given. */
  readonly root: Float64Array;
  /** tr D M⁻¹ D of the matrix M that was given, with D² its diagonal; 1 with deviations. Times a unit of rounding it is how far the weights of
   *  the whitened rows are off (Demmel 1989; see `bound.ts`). */
  readonly condition: number;
}

/** How far mirror images may differ, relative to the geometric mean of their diagonal entries: products such as J Σ Jᵀ come with rounding
 *  errors of a few hundred units in the last place. */
const SYMMETRY_TOLERANCE = 1e-10;

/** A pivot at or below this share of its diagonal entry, times the number of rows, is rounding (Higham, "Accuracy and Stability of
 *  Numerical Algorithms", 2nd ed., theorem 10.7). */
const PIVOT_TOLERANCE = Number.EPSILON;

/** Checks the noise of `rows` rows and takes its root. Cost: O(rows), or rows³ / 3 multiplications for a matrix. */
export function noiseRoot(noise: Noise, rows: number, measurement?: string): NoiseRoot {
  const { covariance, standardDeviations, information } = noise;
  const given = (covariance === undefined ? 0 : 1) + (standardDeviations === undefined ? 0 : 1) + (information === undefined ? 0 : 1);
  if (given !== 1) {
    const forms = ["covariance", "standardDeviations", "information"] as const;
    throw new NoiseFormError(
      forms.filter((form) => noise[form] !== undefined),
      measurement,
    );
  }
  if (standardDeviations !== undefined)
    return { form: "standardDeviations", root: deviationsOf(standardDeviations, rows, measurement), condition: 1 };
  const form = covariance === undefined ? "information" : "covariance";
  const root = new Float64Array(rows * rows);
  matrixInto(root, form, (covariance ?? information)!, rows, rows, measurement);
  choleskyInPlace(root, rows, form, measurement);
  return { form, root, condition: scaledCondition(root, rows) };
}

/** tr D (C Cᵀ)⁻¹ D, D² the diagonal of C Cᵀ. Cost: rows³ ÷ 6. */
function scaledCondition(c: Float64Array, n: number): number {
  const diagonal = Float64Array.from({ length: n }, (_, i) => {
    let sum = 0;
    for (let k = 0; k <= i; k += 1) sum += c[i * n + k]! ** 2;
    return sum;
  });
  let trace = 0;
  const x = new Float64Array(n);
  for (let j = 0; j < n; j += 1) {
    // Column j of C⁻¹: its squares are entry j of the diagonal of (C Cᵀ)⁻¹.
    for (let i = j; i < n; i += 1) {
      let sum = i === j ? 1 : 0;
      for (let k = j; k < i; k += 1) sum -= c[i * n + k]! * x[k]!;
      x[i] = sum / c[i * n + i]!;
      trace += diagonal[j]! * x[i]! ** 2;
    }
  }
  return trace;
}

function deviationsOf(given: ArrayLike<number>, rows: number, measurement: string | undefined): Float64Array {
  if (given.length !== rows)
    throw new MeasurementShapeError("standardDeviations", `of length ${given.length}`, `of length ${rows}, one a row`, measurement);
  const deviations = new Float64Array(rows);
  for (let i = 0; i < rows; i += 1) {
    const value = given[i]!;
    if (!Number.isFinite(value)) throw new MeasurementNotFiniteError(`standardDeviations[${i}]`, value, measurement);
    if (!(value > 0)) throw new StandardDeviationError(i, value, measurement);
    deviations[i] = value;
  }
  return deviations;
}

/** The lower Cholesky factor in place of the matrix, zeros above. Source: Golub, Van Loan, "Matrix Computations", section 4.2. */
function choleskyInPlace(a: Float64Array, n: number, form: "covariance" | "information", measurement: string | undefined): void {
  for (let i = 0; i < n; i += 1) {
    for (let j = 0; j < i; j += 1) {
      const value = a[j * n + i]!; // column-major so far
      const mirrored = a[i * n + j]!;
      const scale = Math.max(Math.abs(value), Math.abs(mirrored), Math.sqrt(Math.abs(a[i * n + i]! * a[j * n + j]!)));
      if (Math.abs(value - mirrored) > SYMMETRY_TOLERANCE * scale)
        throw new NoiseNotSymmetricError(form, i, j, value, mirrored, measurement);
    }
  }
  for (let i = 0; i < n; i += 1) {
    const diagonal = a[i * n + i]!;
    let pivot = diagonal;
    for (let j = 0; j < i; j += 1) {
      let sum = a[i * n + j]!;
      for (let k = 0; k < j; k += 1) sum -= a[i * n + k]! * a[j * n + k]!;
      const entry = sum / a[j * n + j]!;
      a[i * n + j] = entry;
      a[j * n + i] = 0;
      pivot -= entry * entry;
    }
    if (!(pivot > n * PIVOT_TOLERANCE * diagonal)) throw new NoiseNotPositiveDefiniteError(form, i, pivot, measurement);
    a[i * n + i] = Math.sqrt(pivot);
  }
}

/** B⁻¹ X in place of X, rows × columns, column-major. */
export function whitenColumns({ form, root }: NoiseRoot, rows: number, x: Float64Array): void {
  for (let from = 0; from < x.length; from += rows) {
    if (form === "standardDeviations") for (let i = 0; i < rows; i += 1) x[from + i]! /= root[i]!;
    else if (form === "covariance") solveLower(root, rows, x, from);
    else timesLowerTransposed(root, rows, x, from);
  }
}

/** B X in place of X, rows × columns, column-major: whitened rows in their own units again. */
export function restoreColumns({ form, root }: NoiseRoot, rows: number, x: Float64Array): void {
  for (let from = 0; from < x.length; from += rows) {
    if (form === "standardDeviations") for (let i = 0; i < rows; i += 1) x[from + i]! *= root[i]!;
    else if (form === "covariance") timesLower(root, rows, x, from);
    else solveLowerTransposed(root, rows, x, from);
  }
}

function solveLower(c: Float64Array, n: number, x: Float64Array, from: number): void {
  for (let i = 0; i < n; i += 1) {
    let sum = x[from + i]!;
    for (let k = 0; k < i; k += 1) sum -= c[i * n + k]! * x[from + k]!;
    x[from + i] = sum / c[i * n + i]!;
  }
}

function timesLower(c: Float64Array, n: number, x: Float64Array, from: number): void {
  for (let i = n - 1; i >= 0; i -= 1) {
    let sum = 0;
    for (let k = 0; k <= i; k += 1) sum += c[i * n + k]! * x[from + k]!;
    x[from + i] = sum;
  }
}

function timesLowerTransposed(c: Float64Array, n: number, x: Float64Array, from: number): void {
  for (let i = 0; i < n; i += 1) {
    let sum = 0;
    for (let k = i; k < n; k += 1) sum += c[k * n + i]! * x[from + k]!;
    x[from + i] = sum;
  }
}

function solveLowerTransposed(c: Float64Array, n: number, x: Float64Array, from: number): void {
  for (let i = n - 1; i >= 0; i -= 1) {
    let sum = x[from + i]!;
    for (let k = i + 1; k < n; k += 1) sum -= c[k * n + i]! * x[from + k]!;
    x[from + i] = sum / c[i * n + i]!;
  }
}
