import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { centralDifferences } from "../../src/model/central-differences.js";
import { wrapAngle } from "../../src/model/quantities.js";
import { findForm, type ReadingKindName, readingKinds } from "../../src/model/reading-kinds.js";
import { rotationFromVector } from "../../src/model/rotations.js";
import { type StateAt, type StateKindName, stateKinds } from "../../src/model/states.js";
import { real, stateOf, turnVector } from "./arbitraries.js";

const setup = fc.record({ instrumentHeight: real(0, 2), targetHeight: real(0, 2) });
const farApart = (states: StateAt[]) =>
  states.every((a, i) =>
    states
      .slice(0, i)
      .every((b) => a.value.length < 2 || b.value.length < 2 || Math.hypot(a.value[0]! - b.value[0]!, a.value[1]! - b.value[1]!) > 3),
  );
const at = (kind: StateKindName, ...value: number[]): StateAt => ({
  name: kind,
  kind: stateKinds[kind],
  value: stateKinds[kind].normalize(value),
});
const gon = Math.PI / 200;

describe("readings", () => {
  for (const [name, kind] of Object.entries(readingKinds))
    for (const form of kind.forms) {
      // Every kind of state in every role, the other roles at the first kind they accept.
      const combinations = form.states.flatMap((kinds, role) =>
        kinds.map((one) => form.states.map((others, k) => (k === role ? one : others[0]!))),
      );
      for (const combination of new Set(combinations.map((kinds) => kinds.join(" ")))) {
        const kinds = combination.split(" ") as StateKindName[];
        const states = fc.tuple(...kinds.map(stateOf)).filter(farApart);

        test(`${name} on ${kinds.join(", ")}: the Jacobian is minus the residual's derivative, also far from the measured value`, () => {
          fc.assert(
            fc.property(states, fc.tuple(...kinds.map(stateOf)).filter(farApart), setup, (states, others, setup) => {
              const measured = form.predict(others, setup);
              const rest = form.residual(states, measured, setup);
              // Where a residual turn is almost a half turn, it is about to jump.
              fc.pre(form.rowQuantities.every((quantity, k) => quantity !== "angle" || Math.abs(rest[k]!) < 2.9));
              fc.pre(Math.hypot(...rest.slice(3)) < 2.9 || form.rowQuantities.length < 6);
              const jacobians = form.jacobians(states, measured, setup);
              for (const [moved, state] of states.entries()) {
                const numerical = centralDifferences(
                  state,
                  (value) =>
                    form.residual(
                      states.map((other, k) => (k === moved ? { ...state, value } : other)),
                      measured,
                      setup,
                    ),
                  (from, to) =>
                    to.map((number, k) => (form.rowQuantities[k] === "angle" ? wrapAngle(number - from[k]!) : number - from[k]!)),
                );
                expect(jacobians[moved]).toHaveLength(form.rowQuantities.length * state.kind.dimension);
                for (const [k, entry] of jacobians[moved]!.entries()) {
                  // The extrapolation's own error is far below its uncertainty; 600 m with ε rounding over a step of 1e-3 adds 3e-10.
                  expect(Math.abs(entry + numerical.values[k]!)).toBeLessThan(3e-9 + numerical.uncertainty[k]!);
                }
              }
            }),
          );
        });

        test(`${name} on ${kinds.join(", ")}: a noiseless reading leaves no residual`, () => {
          fc.assert(
            fc.property(states, setup, (states, setup) => {
              const predicted = form.predict(states, setup);
              expect(predicted).toHaveLength(form.quantities.length);
              for (const number of form.residual(states, predicted, setup)) expect(Math.abs(number)).toBeLessThan(1e-12);
            }),
          );
        });
      }
    }

  test("a right triangle: distances, azimuths, angle and direction by hand", () => {
    const [a, b, c] = [at("point-2d", 100, 200), at("point-2d", 103, 204), at("point-2d", 103, 200)];
    const predict = (name: ReadingKindName, ...states: StateAt[]) =>
      findForm(
        readingKinds[name],
        states.map((state) => state.kind.name),
      )!.predict(states);
    expect(predict("distance", a, b)[0]).toBe(5);
    // Clockwise from north: 3 east, 4 north lies at atan(3/4); due east at a right angle.
    expect(predict("azimuth", a, b)[0]).toBeCloseTo(Math.atan(3 / 4), 15);
    expect(predict("azimuth", a, c)[0]).toBeCloseTo(100 * gon, 15);
    expect(predict("azimuth", c, a)[0]).toBeCloseTo(300 * gon, 15);
    expect(predict("angle", a, b, c)[0]).toBeCloseTo(100 * gon - Math.atan(3 / 4), 15);
    expect(predict("angle", a, c, b)[0]).toBeCloseTo(300 * gon + Math.atan(3 / 4), 14);
    expect(predict("direction", a, c, at("orientation", 30 * gon))[0]).toBeCloseTo(70 * gon, 15);
    expect(predict("direction", a, c, at("orientation", 130 * gon))[0]).toBeCloseTo(370 * gon, 14);
  });

  test("a sight up a 3-4-12 box, over instrument and target heights", () => {
    const [a, b] = [at("point-3d", 0, 0, 10), at("point-3d", 3, 4, 21.8)];
    const heights = { instrumentHeight: 1.5, targetHeight: 1.7 };
    const [slope, zenith] = (["slope-distance", "zenith-angle"] as const).map(
      (name) => readingKinds[name].forms[0]!.predict([a, b], heights)[0],
    );
    expect(slope).toBeCloseTo(13, 14);
    expect(zenith).toBeCloseTo(Math.atan2(5, 12), 15);
  });

  test("a vehicle heading north sees a mark to the west a quarter turn counter-clockwise of its heading", () => {
    const [range, bearing] = readingKinds["range-bearing"].forms[0]!.predict([
      at("planar-pose", 10, 20, Math.PI / 2),
      at("point-2d", 4, 20),
    ]);
    expect(range).toBe(6);
    expect(bearing).toBeCloseTo(Math.PI / 2, 15);
  });

  test("from a vehicle heading north, one 2 m ahead and 1 m to the left, turned left, in plan and in space", () => {
    const [plan, space] = readingKinds["relative-pose"].forms;
    const planStep = plan!.predict([at("planar-pose", 5, 5, Math.PI / 2), at("planar-pose", 4, 7, Math.PI)]);
    for (const [k, number] of [2, 1, Math.PI / 2].entries()) expect(planStep[k]).toBeCloseTo(number, 14);
    const heading = (angle: number) => rotationFromVector([0, 0, angle]);
    const spaceStep = space!.predict([
      at("spatial-pose", 5, 5, 1, ...heading(Math.PI / 2)),
      at("spatial-pose", 4, 7, 1, ...heading(Math.PI)),
    ]);
    for (const [k, number] of [2, 1, 0, ...heading(Math.PI / 2)].entries()) expect(spaceStep[k]).toBeCloseTo(number, 14);
  });

  test("relative poses along a loop of random poses compose to where the loop began", () => {
    fc.assert(
      fc.property(fc.array(turnVector, { minLength: 2, maxLength: 6 }), (turns) => {
        const form = readingKinds["relative-pose"].forms[1]!;
        const poses = turns.map((phi, k) => at("spatial-pose", k, k * k, -k, ...rotationFromVector(phi)));
        const origin = at("spatial-pose", 0, 0, 0, 1, 0, 0, 0);
        // Stepping from pose to pose with the predicted steps must meet each pose: the step seen from the origin is the pose itself.
        for (const [k, pose] of poses.entries()) {
          const next = poses[(k + 1) % poses.length]!;
          const step = { ...pose, value: form.predict([pose, next]) };
          const back = { ...pose, value: form.predict([step, origin]) };
          const again = form.predict([next, pose]);
          for (const [i, number] of stateKinds["spatial-pose"].local(again, back.value).entries())
            expect(Math.abs(number), `component ${i}`).toBeLessThan(1e-10);
        }
      }),
    );
  });

  test("a circle reading near zero and its prediction near a full turn differ by the small angle between", () => {
    const form = readingKinds.direction.forms[0]!;
    const states = [at("point-2d", 0, 0), at("point-2d", -1e-3, 10), at("orientation", 0)];
    expect(form.predict(states)[0]).toBeCloseTo(2 * Math.PI - 1e-4, 10);
    expect(form.residual(states, Float64Array.of(1e-4))[0]).toBeCloseTo(2e-4, 10);
    const pose = readingKinds["relative-pose"].forms[0]!;
    const residual = pose.residual([at("planar-pose", 0, 0, 3.1), at("planar-pose", 0, 0, -0.03)], Float64Array.of(0, 0, -3.14));
    expect(residual[2]).toBeCloseTo(wrapAngle(-3.14 + 3.13), 12);
  });

  test("states on one spot are refused by name", () => {
    const [a, b] = [
      { ...at("point-2d", 1, 2), name: "P1" },
      { ...at("point-2d", 1, 2), name: "P2" },
    ];
    for (const name of ["distance", "azimuth"] as const)
      expect(() => readingKinds[name].forms[0]!.predict([a, b])).toThrowError(/"P1" and "P2" lie on one spot/);
    const [c, d] = [at("point-3d", 1, 2, 3), at("point-3d", 1, 2, 3)];
    expect(() => readingKinds["slope-distance"].forms[0]!.jacobians([c, d], Float64Array.of(1))).toThrowError(/in space/);
    expect(() => readingKinds["slope-distance"].forms[0]!.jacobians([c, d], Float64Array.of(1), { targetHeight: 1 })).not.toThrow();
  });

  test("kinds of states that a reading cannot join have no form", () => {
    expect(findForm(readingKinds["slope-distance"], ["point-2d", "point-3d"])).toBeUndefined();
    expect(findForm(readingKinds.distance, ["point-2d"])).toBeUndefined();
    expect(findForm(readingKinds.distance, ["point-2d", "spatial-pose"])).toBe(readingKinds.distance.forms[0]);
  });
});
