import { SigmatideError } from "../errors.js";
import { type Quantity, wrapAngle } from "./quantities.js";
import type { StateAt, StateKindName } from "./states.js";

/** Heights above their points, in metres, when an instrument stands and a target is held over the marks. */
export interface Setup {
  readonly instrumentHeight?: number;
  readonly targetHeight?: number;
}

/**
 * One shape of a reading: which states it joins and its mathematics on them. States come in the order of `states`.
 *
 * A residual is measured minus predicted. A Jacobian is minus the residual's derivative with respect to the state's local coordinates,
 * which is the prediction's derivative wherever the value is a plain vector; for a measured pose it takes in the bend of the rotation
 * group as well, so that Gauss–Newton reaches the true minimum also when residual turns are large.
 */
export interface ReadingForm {
  /** Accepted kinds of state, role by role. */
  readonly states: readonly (readonly StateKindName[])[];
  /** What each number of the value measures. */
  readonly quantities: readonly Quantity[];
  /** What each number of the residual, hence each standard deviation, measures. */
  readonly rowQuantities: readonly Quantity[];
  /** The value that the states would give, without noise. */
  predict(states: readonly StateAt[], setup?: Setup): Float64Array;
  /** Measured minus predicted; angles in (−π, π]. */
  residual(states: readonly StateAt[], measured: Float64Array, setup?: Setup): Float64Array;
  /** One row-major rows × dimension matrix for each state. */
  jacobians(states: readonly StateAt[], measured: Float64Array, setup?: Setup): Float64Array[];
}

/** A kind of reading: its name, its roles in order, and the shapes it takes on different kinds of state. */
export interface ReadingKind {
  readonly roles: readonly string[];
  readonly forms: readonly ReadingForm[];
}

export const withPlanPosition: readonly StateKindName[] = ["point-2d", "point-3d", "planar-pose", "spatial-pose"];
export const withSpacePosition: readonly StateKindName[] = ["point-3d", "spatial-pose"];
export const withHeight: readonly StateKindName[] = ["height", "point-3d", "spatial-pose"];

/** A form whose value is a vector of lengths, angles and plain numbers: the residual is the difference, its angles wrapped. */
export function vectorForm(form: Omit<ReadingForm, "residual" | "rowQuantities">): ReadingForm {
  const { quantities } = form;
  return {
    ...form,
    rowQuantities: quantities,
    residual(states, measured, setup) {
      const predicted = form.predict(states, setup);
      return predicted.map((number, k) => (quantities[k] === "angle" ? wrapAngle(measured[k]! - number) : measured[k]! - number));
    },
  };
}

/** A rows × state.dimension matrix, zero but for `block` (rows × width, row-major) at its first column or at `column`. */
export function placeColumns(state: StateAt, rows: number, block: ArrayLike<number>, column = 0): Float64Array {
  const { dimension } = state.kind;
  const width = block.length / rows;
  const matrix = new Float64Array(rows * dimension);
  for (let i = 0; i < rows; i++) for (let j = 0; j < width; j++) matrix[i * dimension + column + j] = block[i * width + j]!;
  return matrix;
}

/** Where a state's local coordinates (and its value) hold its height. */
export function heightIndex(state: StateAt): number {
  return state.kind.name === "height" ? 0 : 2;
}

/** From one position to another in plan: Δx, Δy, the plan distance and its square; refuses coincident points, which have no direction. */
export function planStep(from: StateAt, to: StateAt): { dx: number; dy: number; distance: number; squared: number } {
  const dx = to.value[0]! - from.value[0]!;
  const dy = to.value[1]! - from.value[1]!;
  const distance = Math.hypot(dx, dy);
  if (distance === 0) throw coincident(from, to, "in plan");
  return { dx, dy, distance, squared: distance * distance };
}

export function coincident(from: StateAt, to: StateAt, where: string): SigmatideError {
  return new SigmatideError(
    "COINCIDENT_STATES",
    `"${from.name}" and "${to.name}" lie on one spot ${where}, so a reading between them has no direction: give them different approximate values.`,
    { states: [from.name, to.name], value: Array.from(from.value) },
  );
}
