import { type Quantity, wrapAngle } from "./quantities.js";
import {
  conjugate,
  exponentialDerivative,
  multiplyQuaternions,
  normalizeQuaternion,
  type Quaternion,
  rotationFromVector,
  vectorFromRotation,
} from "./rotations.js";

/**
 * A kind of state: how its value is stored, and the local coordinates in which its correction and its covariance are expressed.
 *
 * Map axes: x east, y north, z up, in metres. The first local coordinates of every kind that has a position are shifts along those
 * axes, so the leading 2 × 2 or 3 × 3 block of its covariance is the covariance of the position in map coordinates.
 */
export interface StateKind {
  readonly name: StateKindName;
  /** Numbers in the stored value. */
  readonly size: number;
  /** Local coordinates: the unknowns of the state. */
  readonly dimension: number;
  /** What each stored number measures. */
  readonly quantities: readonly Quantity[];
  /** What each local coordinate measures. */
  readonly localQuantities: readonly Quantity[];
  /** The value in its standard form: angles in (−π, π], quaternion of unit length with w ≥ 0. */
  normalize(value: ArrayLike<number>): Float64Array;
  /** The value moved by a step in local coordinates, in its standard form. `retract(x, 0) = x`. */
  retract(value: Float64Array, step: ArrayLike<number>): Float64Array;
  /** The step from one value to another: `retract(from, local(from, to)) = to`; turns come out in (−π, π]. */
  local(from: Float64Array, to: Float64Array): Float64Array;
  /**
   * How local coordinates at `retract(x, step)` follow those at x: the derivative of `local(retract(x, step), retract(x, step + ε))` with
   * respect to ε at 0, dimension × dimension, row-major. `undefined` stands for the identity.
   */
  chart(step: ArrayLike<number>): Float64Array | undefined;
}

export type StateKindName = "scalar" | "clock-offset" | "orientation" | "height" | "point-2d" | "point-3d" | "planar-pose" | "spatial-pose";

/** A state whose local coordinates are its stored numbers; angles among them wrap. */
function vectorKind(name: StateKindName, quantities: readonly Quantity[]): StateKind {
  const wrapped = (value: number, k: number) => (quantities[k] === "angle" ? wrapAngle(value) : value);
  return {
    name,
    size: quantities.length,
    dimension: quantities.length,
    quantities,
    localQuantities: quantities,
    normalize: (value) => Float64Array.from(value, wrapped),
    retract: (value, step) => value.map((number, k) => wrapped(number + step[k]!, k)),
    local: (from, to) => to.map((number, k) => wrapped(number - from[k]!, k)),
    chart: () => undefined,
  };
}

/** The quaternion of a spatial pose's value. */
export function attitude(value: ArrayLike<number>): Quaternion {
  return [value[3]!, value[4]!, value[5]!, value[6]!];
}

/**
 * Position and attitude in space. Stored: x, y, z, then the unit quaternion w, x, y, z that turns body into map coordinates.
 * Local coordinates: the shift in map axes, then the turn φ about the body's own axes: p' = p + δ, R' = R Exp(φ).
 */
const spatialPose: StateKind = {
  name: "spatial-pose",
  size: 7,
  dimension: 6,
  quantities: ["length", "length", "length", "plain", "plain", "plain", "plain"],
  localQuantities: ["length", "length", "length", "angle", "angle", "angle"],
  normalize: (value) => Float64Array.of(value[0]!, value[1]!, value[2]!, ...normalizeQuaternion(attitude(value))),
  retract(value, step) {
    const turned = multiplyQuaternions(attitude(value), rotationFromVector([step[3]!, step[4]!, step[5]!]));
    return this.normalize([value[0]! + step[0]!, value[1]! + step[1]!, value[2]! + step[2]!, ...turned]);
  },
  local(from, to) {
    const turn = vectorFromRotation(multiplyQuaternions(conjugate(attitude(from)), attitude(to)));
    return Float64Array.of(to[0]! - from[0]!, to[1]! - from[1]!, to[2]! - from[2]!, ...turn);
  },
  chart(step) {
    const turning = exponentialDerivative([step[3]!, step[4]!, step[5]!]);
    const matrix = new Float64Array(36);
    for (let i = 0; i < 3; i++) {
      matrix[7 * i] = 1;
      for (let j = 0; j < 3; j++) matrix[6 * (3 + i) + 3 + j] = turning[3 * i + j]!;
    }
    return matrix;
  },
};

/**
 * Every kind of state, by name.
 *
 * | kind | stored value | unit |
 * |---|---|---|
 * | `scalar` | one number | its own |
 * | `clock-offset` | offset of a clock | s |
 * | `orientation` | azimuth of the zero of a station's circle, clockwise from north | rad |
 * | `height` | z | m |
 * | `point-2d`, `point-3d` | x east, y north (, z up) | m |
 * | `planar-pose` | x, y, heading counter-clockwise from the x axis (east) | m, m, rad |
 * | `spatial-pose` | x, y, z, attitude as a unit quaternion w, x, y, z | m; local turn in rad |
 */
export const stateKinds: Readonly<Record<StateKindName, StateKind>> = {
  scalar: vectorKind("scalar", ["plain"]),
  "clock-offset": vectorKind("clock-offset", ["time"]),
  orientation: vectorKind("orientation", ["angle"]),
  height: vectorKind("height", ["length"]),
  "point-2d": vectorKind("point-2d", ["length", "length"]),
  "point-3d": vectorKind("point-3d", ["length", "length", "length"]),
  "planar-pose": vectorKind("planar-pose", ["length", "length", "angle"]),
  "spatial-pose": spatialPose,
};

/** A state at its present value. */
export interface StateAt {
  readonly name: string;
  readonly kind: StateKind;
  readonly value: Float64Array;
}
