import {
  coincident,
  placeColumns,
  planStep,
  type ReadingKind,
  type Setup,
  vectorForm,
  withPlanPosition,
  withSpacePosition,
} from "../reading-form.js";
import type { StateAt } from "../states.js";

/** The horizontal distance between two positions, in metres. */
export const distance: ReadingKind = {
  roles: ["from", "to"],
  forms: [
    vectorForm({
      states: [withPlanPosition, withPlanPosition],
      quantities: ["length"],
      predict: ([from, to]) => Float64Array.of(planStep(from!, to!).distance),
      jacobians([from, to]) {
        const { dx, dy, distance } = planStep(from!, to!);
        const [ux, uy] = [dx / distance, dy / distance];
        return [placeColumns(from!, 1, [-ux, -uy]), placeColumns(to!, 1, [ux, uy])];
      },
    }),
  ],
};

/** From instrument to target in space: the step and its length. */
function sightLine(from: StateAt, to: StateAt, setup: Setup = {}): { step: number[]; length: number } {
  const step = [0, 1, 2].map((k) => to.value[k]! - from.value[k]!);
  step[2]! += (setup.targetHeight ?? 0) - (setup.instrumentHeight ?? 0);
  const length = Math.hypot(...step);
  if (length === 0) throw coincident(from, to, "in space");
  return { step, length };
}

/** The straight distance in space from the instrument to the target, in metres. */
export const slopeDistance: ReadingKind = {
  roles: ["station", "target"],
  forms: [
    vectorForm({
      states: [withSpacePosition, withSpacePosition],
      quantities: ["length"],
      predict: ([from, to], setup) => Float64Array.of(sightLine(from!, to!, setup).length),
      jacobians([from, to], _measured, setup) {
        const { step, length } = sightLine(from!, to!, setup);
        const unit = step.map((component) => component / length);
        return [
          placeColumns(
            from!,
            1,
            unit.map((component) => -component),
          ),
          placeColumns(to!, 1, unit),
        ];
      },
    }),
  ],
};

/**
 * The angle at the instrument between the zenith and the target, in [0, π]. Straight lines in level axes: no refraction, no curvature
 * of the earth; correct long sights before they are logged.
 */
export const zenithAngle: ReadingKind = {
  roles: ["station", "target"],
  forms: [
    vectorForm({
      states: [withSpacePosition, withSpacePosition],
      quantities: ["angle"],
      predict([from, to], setup) {
        const { step } = sightLine(from!, to!, setup);
        return Float64Array.of(Math.atan2(Math.hypot(step[0]!, step[1]!), step[2]!));
      },
      jacobians([from, to], _measured, setup) {
        const { distance } = planStep(from!, to!);
        const { step, length } = sightLine(from!, to!, setup);
        const [dx, dy, dz] = step as [number, number, number];
        const plan = dz / (distance * length * length);
        const derivative = [dx * plan, dy * plan, -distance / (length * length)];
        return [
          placeColumns(
            from!,
            1,
            derivative.map((component) => -component),
          ),
          placeColumns(to!, 1, derivative),
        ];
      },
    }),
  ],
};
