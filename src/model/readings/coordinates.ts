import {
  heightIndex,
  placeColumns,
  type ReadingForm,
  type ReadingKind,
  vectorForm,
  withHeight,
  withPlanPosition,
  withSpacePosition,
} from "../reading-form.js";
import type { StateKindName } from "../states.js";

const inPlan: readonly StateKindName[] = withPlanPosition.filter((kind) => !withSpacePosition.includes(kind));

const identity = (size: number): number[] => Array.from({ length: size * size }, (_, k) => (k % (size + 1) === 0 ? 1 : 0));

function positionForm(kinds: readonly StateKindName[], size: 2 | 3): ReadingForm {
  return vectorForm({
    states: [kinds],
    quantities: Array<"length">(size).fill("length"),
    predict: ([state]) => state!.value.slice(0, size),
    jacobians: ([state]) => [placeColumns(state!, size, identity(size))],
  });
}

/** A measured position, in map axes: x east, y north (and z up, for a state in space). */
export const position: ReadingKind = { roles: ["state"], forms: [positionForm(inPlan, 2), positionForm(withSpacePosition, 3)] };

function differenceForm(kinds: readonly StateKindName[], size: 2 | 3): ReadingForm {
  return vectorForm({
    states: [kinds, kinds],
    quantities: Array<"length">(size).fill("length"),
    predict: ([from, to]) => from!.value.slice(0, size).map((number, k) => to!.value[k]! - number),
    jacobians: ([from, to]) => [
      placeColumns(
        from!,
        size,
        identity(size).map((number) => -number),
      ),
      placeColumns(to!, size, identity(size)),
    ],
  });
}

/** A measured step between two positions, in map axes: as a satellite baseline gives it, usually with its full covariance. */
export const coordinateDifference: ReadingKind = {
  roles: ["from", "to"],
  forms: [differenceForm(inPlan, 2), differenceForm(withSpacePosition, 3)],
};

/** Height of the second state minus height of the first, in metres: one levelled run. */
export const heightDifference: ReadingKind = {
  roles: ["from", "to"],
  forms: [
    vectorForm({
      states: [withHeight, withHeight],
      quantities: ["length"],
      predict: ([from, to]) => Float64Array.of(to!.value[heightIndex(to!)]! - from!.value[heightIndex(from!)]!),
      jacobians: ([from, to]) => [placeColumns(from!, 1, [-1], heightIndex(from!)), placeColumns(to!, 1, [1], heightIndex(to!))],
    }),
  ],
};
