// Random states of every kind, away from the places where a reading has no direction.
import fc from "fast-check";
import { rotationFromVector } from "../../src/model/rotations.js";
import { type StateAt, type StateKindName, stateKinds } from "../../src/model/states.js";

export const real = (min: number, max: number): fc.Arbitrary<number> => fc.double({ min, max, noNaN: true, noDefaultInfinity: true });

const length = real(-300, 300);
const turn = real(-Math.PI, Math.PI);
/** Any rotation but those within 0.04 rad of a half turn, whose logarithm jumps. */
export const turnVector: fc.Arbitrary<[number, number, number]> = fc
  .tuple(turn, turn, turn)
  .filter(([x, y, z]) => Math.hypot(x, y, z) < 3.1);

/** Zero, or not near it: next to zero a step in proportion to the number drowns in the rounding of the others. */
const awayFromZero = (least: number) => (number: number) => (Math.abs(number) < least ? 0 : number);

const values: Record<StateKindName, fc.Arbitrary<number[]>> = {
  scalar: fc.tuple(length.map(awayFromZero(1))),
  "clock-offset": fc.tuple(real(-1, 1).map(awayFromZero(0.01))),
  orientation: fc.tuple(turn),
  height: fc.tuple(length),
  "point-2d": fc.tuple(length, length),
  "point-3d": fc.tuple(length, length, length),
  "planar-pose": fc.tuple(length, length, turn),
  "spatial-pose": fc.tuple(length, length, length, turnVector).map(([x, y, z, phi]) => [x, y, z, ...rotationFromVector(phi)]),
};

export const stateOf = (name: StateKindName): fc.Arbitrary<StateAt> =>
  values[name].map((value) => ({ name, kind: stateKinds[name], value: stateKinds[name].normalize(value) }));

export const stepOf = (name: StateKindName): fc.Arbitrary<number[]> =>
  name === "spatial-pose"
    ? fc.tuple(length, length, length, turnVector).map(([x, y, z, phi]) => [x, y, z, ...phi])
    : values[name].filter((value) => value.every((number, k) => stateKinds[name].quantities[k] !== "angle" || Math.abs(number) < 3.1));
