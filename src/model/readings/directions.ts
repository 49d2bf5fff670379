import { wrapTurn } from "../quantities.js";
import { placeColumns, planStep, type ReadingKind, vectorForm, withPlanPosition } from "../reading-form.js";
import type { StateAt } from "../states.js";

/** The azimuth from one position to another, clockwise from north (the y axis), in (−π, π]. */
export function azimuthBetween(from: StateAt, to: StateAt): number {
  const { dx, dy } = planStep(from, to);
  return Math.atan2(dx, dy);
}

/** The azimuth's derivative with respect to the far end's x and y; with respect to the near end's it is the opposite. */
function azimuthDerivative(from: StateAt, to: StateAt): [number, number] {
  const { dx, dy, squared } = planStep(from, to);
  return [dy / squared, -dx / squared];
}

const opposite = (pair: readonly number[]): number[] => pair.map((component) => -component);

/** The azimuth from one position to another, clockwise from north (the y axis), in [0, 2π). */
export const azimuth: ReadingKind = {
  roles: ["from", "to"],
  forms: [
    vectorForm({
      states: [withPlanPosition, withPlanPosition],
      quantities: ["angle"],
      predict: ([from, to]) => Float64Array.of(wrapTurn(azimuthBetween(from!, to!))),
      jacobians([from, to]) {
        const derivative = azimuthDerivative(from!, to!);
        return [placeColumns(from!, 1, opposite(derivative)), placeColumns(to!, 1, derivative)];
      },
    }),
  ],
};

/** A reading of a station's horizontal circle, clockwise, in [0, 2π): the azimuth minus the orientation of the set it belongs to. */
export const direction: ReadingKind = {
  roles: ["station", "target", "orientation"],
  forms: [
    vectorForm({
      states: [withPlanPosition, withPlanPosition, ["orientation"]],
      quantities: ["angle"],
      predict: ([from, to, orientation]) => Float64Array.of(wrapTurn(azimuthBetween(from!, to!) - orientation!.value[0]!)),
      jacobians([from, to]) {
        const derivative = azimuthDerivative(from!, to!);
        return [placeColumns(from!, 1, opposite(derivative)), placeColumns(to!, 1, derivative), Float64Array.of(-1)];
      },
    }),
  ],
};

/** The angle at a station, clockwise from the backsight to the foresight, in [0, 2π). */
export const angle: ReadingKind = {
  roles: ["station", "backsight", "foresight"],
  forms: [
    vectorForm({
      states: [withPlanPosition, withPlanPosition, withPlanPosition],
      quantities: ["angle"],
      predict: ([station, back, fore]) => Float64Array.of(wrapTurn(azimuthBetween(station!, fore!) - azimuthBetween(station!, back!))),
      jacobians([station, back, fore]) {
        const toBack = azimuthDerivative(station!, back!);
        const toFore = azimuthDerivative(station!, fore!);
        return [
          placeColumns(station!, 1, [toBack[0] - toFore[0], toBack[1] - toFore[1]]),
          placeColumns(back!, 1, opposite(toBack)),
          placeColumns(fore!, 1, toFore),
        ];
      },
    }),
  ],
};
