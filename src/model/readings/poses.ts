import { wrapAngle } from "../quantities.js";
import { placeColumns, planStep, type ReadingForm, type ReadingKind, vectorForm } from "../reading-form.js";
import {
  apply,
  conjugate,
  crossMatrix,
  logarithmDerivative,
  type Matrix3,
  multiplyMatrices,
  multiplyQuaternions,
  rotationMatrix,
  transpose,
  type Vector3,
} from "../rotations.js";
import { attitude, type StateAt, stateKinds } from "../states.js";

/**
 * What a vehicle measures to a mark: the plan distance, and the bearing counter-clockwise from its heading, in (−π, π].
 * (Azimuths and circle readings run clockwise from north, as the surveying trade has them; a vehicle's angles run as its heading does.)
 */
export const rangeBearing: ReadingKind = {
  roles: ["vehicle", "mark"],
  forms: [
    vectorForm({
      states: [["planar-pose"], ["point-2d", "planar-pose"]],
      quantities: ["length", "angle"],
      predict([vehicle, mark]) {
        const { dx, dy, distance } = planStep(vehicle!, mark!);
        return Float64Array.of(distance, wrapAngle(Math.atan2(dy, dx) - vehicle!.value[2]!));
      },
      jacobians([vehicle, mark]) {
        const { dx, dy, distance, squared } = planStep(vehicle!, mark!);
        const [cx, cy] = [dx / distance, dy / distance];
        const [bx, by] = [-dy / squared, dx / squared];
        return [Float64Array.of(-cx, -cy, 0, -bx, -by, -1), placeColumns(mark!, 2, [cx, cy, bx, by])];
      },
    }),
  ],
};

const planarPose: ReadingForm = vectorForm({
  states: [["planar-pose"]],
  quantities: stateKinds["planar-pose"].quantities,
  predict: ([state]) => state!.value.slice(),
  jacobians: () => [Float64Array.of(1, 0, 0, 0, 1, 0, 0, 0, 1)],
});

/** The second pose in the axes of the first: forward, left, turn. */
const planarStep: ReadingForm = vectorForm({
  states: [["planar-pose"], ["planar-pose"]],
  quantities: stateKinds["planar-pose"].quantities,
  predict: ([from, to]) => {
    const [dx, dy] = [to!.value[0]! - from!.value[0]!, to!.value[1]! - from!.value[1]!];
    const [c, s] = [Math.cos(from!.value[2]!), Math.sin(from!.value[2]!)];
    return Float64Array.of(c * dx + s * dy, c * dy - s * dx, wrapAngle(to!.value[2]! - from!.value[2]!));
  },
  jacobians: ([from, to]) => {
    const [forward, left] = planarStep.predict([from!, to!]) as unknown as [number, number];
    const [c, s] = [Math.cos(from!.value[2]!), Math.sin(from!.value[2]!)];
    return [Float64Array.of(-c, -s, left, s, -c, -forward, 0, 0, -1), Float64Array.of(c, s, 0, -s, c, 0, 0, 0, 1)];
  },
});

const { quantities: poseQuantities, localQuantities: poseRows } = stateKinds["spatial-pose"];

/** A 6 × 6 matrix from its four 3 × 3 blocks, row-major. */
function blocks(a: Matrix3, b: Matrix3, c: Matrix3, d: Matrix3): Float64Array {
  const matrix = new Float64Array(36);
  for (let i = 0; i < 3; i++)
    for (let j = 0; j < 3; j++) {
      matrix[6 * i + j] = a[3 * i + j]!;
      matrix[6 * i + 3 + j] = b[3 * i + j]!;
      matrix[6 * (i + 3) + j] = c[3 * i + j]!;
      matrix[6 * (i + 3) + 3 + j] = d[3 * i + j]!;
    }
  return matrix;
}

const zero: Matrix3 = new Float64Array(9);
const unit: Matrix3 = Float64Array.of(1, 0, 0, 0, 1, 0, 0, 0, 1);
const negative = (a: Matrix3): Matrix3 => a.map((number) => -number);

/** From the predicted pose to the measured one, in the predicted pose's local coordinates. */
const poseResidual = (predicted: Float64Array, measured: Float64Array): Float64Array =>
  stateKinds["spatial-pose"].local(predicted, measured);

/** How the residual turn shrinks when the predicted pose turns: the bend of the rotation group at the residual. */
function bend(predicted: Float64Array, measured: Float64Array): Matrix3 {
  const residual = poseResidual(predicted, measured);
  return logarithmDerivative([residual[3]!, residual[4]!, residual[5]!]);
}

const spatialPose: ReadingForm = {
  states: [["spatial-pose"]],
  quantities: poseQuantities,
  rowQuantities: poseRows,
  predict: ([state]) => state!.value.slice(),
  residual: ([state], measured) => poseResidual(state!.value, measured),
  jacobians: ([state], measured) => [blocks(unit, zero, zero, bend(state!.value, measured))],
};

function spatialRelation(from: StateAt, to: StateAt): { predicted: Float64Array; step: Vector3; intoFrom: Matrix3 } {
  const intoFrom = transpose(rotationMatrix(attitude(from.value)));
  const shift: Vector3 = [to.value[0]! - from.value[0]!, to.value[1]! - from.value[1]!, to.value[2]! - from.value[2]!];
  const step = apply(intoFrom, shift);
  const turn = multiplyQuaternions(conjugate(attitude(from.value)), attitude(to.value));
  return { predicted: stateKinds["spatial-pose"].normalize([...step, ...turn]), step, intoFrom };
}

/** The second pose in the axes of the first. With t the step and R its turn: dt = [t]ₓ φ₁ + R₁ᵀ (δ₂ − δ₁), and R turns by φ₂ − Rᵀ φ₁. */
const spatialStep: ReadingForm = {
  states: [["spatial-pose"], ["spatial-pose"]],
  quantities: poseQuantities,
  rowQuantities: poseRows,
  predict: ([from, to]) => spatialRelation(from!, to!).predicted,
  residual: ([from, to], measured) => poseResidual(spatialRelation(from!, to!).predicted, measured),
  jacobians([from, to], measured) {
    const { predicted, step, intoFrom } = spatialRelation(from!, to!);
    const turning = bend(predicted, measured);
    const back = transpose(rotationMatrix(attitude(predicted)));
    return [
      blocks(negative(intoFrom), crossMatrix(step), zero, negative(multiplyMatrices(turning, back))),
      blocks(intoFrom, zero, zero, turning),
    ];
  },
};

/** A whole pose measured in map axes; its standard deviations are in the pose's local coordinates. */
export const pose: ReadingKind = { roles: ["state"], forms: [planarPose, spatialPose] };

/** One pose as seen from another, in the axes of the first: odometry, or a place met again. */
export const relativePose: ReadingKind = { roles: ["from", "to"], forms: [planarStep, spatialStep] };
