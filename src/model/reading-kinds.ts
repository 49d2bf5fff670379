import type { ReadingForm, ReadingKind } from "./reading-form.js";
import { coordinateDifference, heightDifference, position } from "./readings/coordinates.js";
import { angle, azimuth, direction } from "./readings/directions.js";
import { distance, slopeDistance, zenithAngle } from "./readings/distances.js";
import { pose, rangeBearing, relativePose } from "./readings/poses.js";
import { scalar, scalarDifference } from "./readings/scalars.js";
import type { StateKindName } from "./states.js";

export type ReadingKindName =
  | "position"
  | "distance"
  | "slope-distance"
  | "direction"
  | "angle"
  | "azimuth"
  | "zenith-angle"
  | "height-difference"
  | "coordinate-difference"
  | "range-bearing"
  | "pose"
  | "relative-pose"
  | "scalar"
  | "scalar-difference";

/** Every built-in kind of reading, by the name the log uses. */
export const readingKinds: Readonly<Record<ReadingKindName, ReadingKind>> = {
  position,
  distance,
  "slope-distance": slopeDistance,
  direction,
  angle,
  azimuth,
  "zenith-angle": zenithAngle,
  "height-difference": heightDifference,
  "coordinate-difference": coordinateDifference,
  "range-bearing": rangeBearing,
  pose,
  "relative-pose": relativePose,
  scalar,
  "scalar-difference": scalarDifference,
};

/** The form a reading of this kind takes on states of these kinds, or `undefined` when they do not fit. */
export function findForm(kind: ReadingKind, states: readonly StateKindName[]): ReadingForm | undefined {
  return kind.forms.find((form) => form.states.length === states.length && form.states.every((kinds, k) => kinds.includes(states[k]!)));
}
