// A measurement checked and whitened: its rows multiplied by R^(−1/2), so that their noise is independent with variance one.
import { requireKnownOptions } from "../support/checks.js";
import { EmptyMeasurementError, MeasurementNotFiniteError, MeasurementShapeError, UnknownStateError, WeightRangeError } from "./errors.js";
import { type Noise, type NoiseRoot, noiseRoot, whitenColumns } from "./noise.js";
import { type Matrix, matrixInto } from "./small-matrix.js";
import type { WhitenedRows } from "./whitened.js";

/** Identifies a state of one estimate; ids are not used again. */
export type StateId = number;

/** What a measurement says at the linearization point. */
export interface Linearization {
  /** One a state, in the order of `states`: rows × the state's dimension, the derivative of the prediction. */
  readonly jacobians: readonly Matrix[];
  /** Measured minus predicted, one number a row. */
  readonly residual: ArrayLike<number>;
}

/** A measurement of any number of states and rows, with exactly one form of noise. */
export interface MeasurementInput extends Linearization, Noise {
  /** The states that it reads. The same state twice is allowed: its blocks add up. */
  readonly states: readonly StateId[];
  /** Used in messages. */
  readonly name?: string | undefined;
}

/** A measurement as an estimate keeps it. */
export interface CheckedMeasurement extends WhitenedRows {
  /** The states as given, repeats included: what Jacobians of a later linearization go with. */
  readonly given: readonly StateId[];
  readonly noise: NoiseRoot;
  readonly name: string | undefined;
}

/** Largest whitened number: sums of its squares stay in range. */
const LARGEST = 1e150;

const fields: readonly string[] = ["states", "jacobians", "residual", "covariance", "standardDeviations", "information", "name"];
const isField = (key: string): boolean => fields.includes(key);

/**
 * Checks a measurement and whitens it: block B⁻¹ J on each distinct state (in the order in which they first appear; blocks of a state
 * that is named twice add up), residual B⁻¹ r, with R = B Bᵀ by Cholesky of the covariance, or of the information, transposed.
 * @param dimensionOf the unknowns of a state, or undefined when there is none.
 * @throws {EmptyMeasurementError | MeasurementShapeError | MeasurementNotFiniteError | UnknownStateError | NoiseFormError |
 *   StandardDeviationError | NoiseNotSymmetricError | NoiseNotPositiveDefiniteError | WeightRangeError | OptionError}
 * The input is copied. Cost: O(numbers in it) with standard deviations, O(rows² columns + rows³) with a matrix.
 */
export function whiten(input: MeasurementInput, dimensionOf: (state: StateId) => number | undefined): CheckedMeasurement {
  for (const key in input) if (!isField(key)) requireKnownOptions("a measurement", input, fields);
  const { states, residual, name } = input;
  requireList("states", states, name);
  requireList("residual", residual, name);
  if (states.length === 0) throw new EmptyMeasurementError("states", name);
  if (residual.length === 0) throw new EmptyMeasurementError("residual", name);
  const noise = noiseRoot(input, residual.length, name);
  return whitenBy(noise, Array.from(states), input, dimensionOf, name);
}

/** The measurement linearized anew: the same states and noise.
 *  @throws {MeasurementShapeError | MeasurementNotFiniteError | UnknownStateError | WeightRangeError | OptionError} as `whiten`. */
export function relinearize(
  measurement: CheckedMeasurement,
  by: Linearization,
  dimensionOf: (state: StateId) => number | undefined,
): CheckedMeasurement {
  requireKnownOptions("a new linearization", by, ["jacobians", "residual"]);
  const { given, noise, name, rows } = measurement;
  requireList("residual", by.residual, name);
  if (by.residual.length !== rows)
    throw new MeasurementShapeError("residual", `of length ${by.residual.length}`, `of length ${rows}, as before`, name);
  return whitenBy(noise, given, by, dimensionOf, name);
}

function requireList(part: string, list: ArrayLike<unknown> | undefined, measurement: string | undefined): void {
  if (typeof list !== "object" || list === null || !Number.isInteger(list.length))
    throw new MeasurementShapeError(part, String(list), "a list", measurement);
}

function whitenBy(
  noise: NoiseRoot,
  given: readonly StateId[],
  { jacobians, residual: residualGiven }: Linearization,
  dimensionOf: (state: StateId) => number | undefined,
  name: string | undefined,
): CheckedMeasurement {
  const rows = residualGiven.length;
  requireList("jacobians", jacobians, name);
  if (jacobians.length !== given.length)
    throw new MeasurementShapeError("jacobians", `of length ${jacobians.length}`, `of length ${given.length}, one a state`, name);
  const states: StateId[] = [];
  const blocks: Float64Array[] = [];
  for (let k = 0; k < given.length; k += 1) {
    const state = given[k]!;
    const dimension = dimensionOf(state);
    if (dimension === undefined)
      throw new UnknownStateError(state, name === undefined ? `states[${k}]` : `states[${k}] of measurement "${name}"`);
    let at = states.indexOf(state);
    if (at < 0) {
      at = states.length;
      states.push(state);
      blocks.push(new Float64Array(rows * dimension));
    }
    matrixInto(blocks[at]!, k === 0 ? "jacobians[0]" : `jacobians[${k}]`, jacobians[k]!, rows, dimension, name);
  }
  const residual = new Float64Array(rows);
  for (let i = 0; i < rows; i += 1) {
    const value = residualGiven[i]!;
    if (!Number.isFinite(value)) throw new MeasurementNotFiniteError(`residual[${i}]`, value, name);
    residual[i] = value;
  }
  for (const block of blocks) {
    whitenColumns(noise, rows, block);
    requireRange(block, rows, name);
  }
  whitenColumns(noise, rows, residual);
  requireRange(residual, rows, name);
  return { states, rows, blocks, residual, given: states.length === given.length ? states : given, noise, name };
}

function requireRange(x: Float64Array, rows: number, name: string | undefined): void {
  for (let k = 0; k < x.length; k += 1) if (!(Math.abs(x[k]!) <= LARGEST)) throw new WeightRangeError(k % rows, name);
}
