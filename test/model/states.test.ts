import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { wrapAngle, wrapTurn } from "../../src/model/quantities.js";
import {
  apply,
  conjugate,
  logarithmDerivative,
  multiplyQuaternions,
  type Quaternion,
  rotationFromVector,
  rotationMatrix,
  vectorFromRotation,
} from "../../src/model/rotations.js";
import { attitude, type StateKindName, stateKinds } from "../../src/model/states.js";
import { real, stateOf, stepOf, turnVector } from "./arbitraries.js";

/** Numbers up to 600 with a handful of roundings each. */
const rounding = 600 * 8 * Number.EPSILON;
/** A turn within 0.04 rad of a half turn loses up to 1/0.04 in its logarithm. */
const turnRounding = 50 * 8 * Number.EPSILON;

describe("angles", () => {
  test("wrapAngle gives the one angle in (−π, π] that differs by whole turns", () => {
    fc.assert(
      fc.property(real(-1e4, 1e4), (angle) => {
        const wrapped = wrapAngle(angle);
        expect(wrapped).toBeGreaterThan(-Math.PI);
        expect(wrapped).toBeLessThanOrEqual(Math.PI);
        const turns = (angle - wrapped) / (2 * Math.PI);
        expect(Math.abs(turns - Math.round(turns))).toBeLessThan(1e4 * Number.EPSILON);
      }),
    );
    expect([wrapAngle(Math.PI), wrapAngle(-Math.PI), wrapAngle(3 * Math.PI), wrapAngle(0)]).toEqual([Math.PI, Math.PI, Math.PI, 0]);
  });

  test("wrapTurn gives the one angle in [0, 2π)", () => {
    fc.assert(
      fc.property(real(-1e4, 1e4), (angle) => {
        const wrapped = wrapTurn(angle);
        expect(wrapped).toBeGreaterThanOrEqual(0);
        expect(wrapped).toBeLessThan(2 * Math.PI);
        expect(Math.abs(wrapAngle(wrapped - angle))).toBeLessThan(1e4 * 4 * Number.EPSILON);
      }),
    );
    expect([wrapTurn(2 * Math.PI), wrapTurn(-1e-300), wrapTurn(0)]).toEqual([0, 0, 0]);
  });
});

describe("state kinds", () => {
  for (const name of Object.keys(stateKinds) as StateKindName[]) {
    const kind = stateKinds[name];

    test(`${name}: retract and local are inverse of each other, and a zero step stays`, () => {
      fc.assert(
        fc.property(stateOf(name), stateOf(name), stepOf(name), (from, to, step) => {
          const there = kind.local(from.value, kind.retract(from.value, step));
          for (const [k, number] of there.entries())
            expect(Math.abs(number - step[k]!)).toBeLessThan(kind.localQuantities[k] === "angle" ? turnRounding : rounding);
          const arrived = kind.local(to.value, kind.retract(from.value, kind.local(from.value, to.value)));
          for (const number of arrived) expect(Math.abs(number)).toBeLessThan(rounding);
          const stayed = kind.local(from.value, kind.retract(from.value, new Float64Array(kind.dimension)));
          for (const number of stayed) expect(Math.abs(number)).toBeLessThan(rounding);
        }),
      );
    });

    test(`${name}: chart is the derivative of local coordinates at a stepped value by those at the value`, () => {
      fc.assert(
        fc.property(stateOf(name), stepOf(name), ({ value }, step) => {
          const there = kind.retract(value, step);
          const chart =
            kind.chart(step) ?? Float64Array.from({ length: kind.dimension ** 2 }, (_, k) => (k % (kind.dimension + 1) === 0 ? 1 : 0));
          const h = 1e-5;
          for (let j = 0; j < kind.dimension; j++) {
            const at = (sign: number) =>
              kind.local(
                there,
                kind.retract(
                  value,
                  step.map((number, k) => number + (k === j ? sign * h : 0)),
                ),
              );
            const [ahead, behind] = [at(1), at(-1)];
            // Central differences: h² × third derivative (of the order of 1), and 600 m × ε / h.
            for (let i = 0; i < kind.dimension; i++)
              expect(Math.abs((ahead[i]! - behind[i]!) / (2 * h) - chart[i * kind.dimension + j]!)).toBeLessThan(2e-8);
          }
        }),
      );
    });

    test(`${name}: its lengths agree and normalize leaves a standard value alone`, () => {
      fc.assert(
        fc.property(stateOf(name), ({ value }) => {
          expect([value.length, kind.quantities.length, kind.localQuantities.length]).toEqual([kind.size, kind.size, kind.dimension]);
          expect(kind.normalize(value)).toEqual(value);
        }),
      );
    });
  }

  test("a heading just short of west, turned a little, comes out just past it", () => {
    const turned = stateKinds["planar-pose"].retract(Float64Array.of(0, 0, Math.PI - 0.01), [0, 0, 0.03]);
    expect(turned[2]).toBeCloseTo(-Math.PI + 0.02, 14);
    expect(stateKinds["planar-pose"].local(Float64Array.of(0, 0, Math.PI - 0.01), turned)[2]).toBeCloseTo(0.03, 14);
  });
});

describe("rotations", () => {
  test("a quarter turn about z carries x to y, by quaternion and by matrix", () => {
    const quarter = rotationFromVector([0, 0, Math.PI / 2]);
    for (const [k, number] of apply(rotationMatrix(quarter), [1, 0, 0]).entries()) expect(number).toBeCloseTo([0, 1, 0][k]!, 15);
  });

  test("quaternions and q v q⁻¹ and matrices and Rodrigues' formula (1840) agree", () => {
    fc.assert(
      fc.property(turnVector, turnVector, (phi, v) => {
        const q = rotationFromVector(phi);
        const sandwich = multiplyQuaternions(multiplyQuaternions(q, [0, ...v] as Quaternion), conjugate(q)).slice(1);
        const matrix = apply(rotationMatrix(q), v);
        const angle = Math.hypot(...phi);
        const axis = phi.map((number) => (angle === 0 ? 0 : number / angle)) as [number, number, number];
        const along = axis[0] * v[0] + axis[1] * v[1] + axis[2] * v[2];
        const cross = [axis[1] * v[2] - axis[2] * v[1], axis[2] * v[0] - axis[0] * v[2], axis[0] * v[1] - axis[1] * v[0]];
        for (let k = 0; k < 3; k++) {
          const rodrigues = v[k]! * Math.cos(angle) + cross[k]! * Math.sin(angle) + axis[k]! * along * (1 - Math.cos(angle));
          expect(Math.abs(sandwich[k]! - matrix[k]!)).toBeLessThan(64 * Number.EPSILON);
          expect(Math.abs(rodrigues - matrix[k]!)).toBeLessThan(64 * Number.EPSILON);
        }
      }),
    );
  });

  test("the logarithm undoes the exponential down to the smallest turns, and q and −q have one logarithm", () => {
    fc.assert(
      fc.property(turnVector, real(-12, 0), (direction, exponent) => {
        const phi = direction.map((number) => number * 10 ** exponent) as [number, number, number];
        const q = rotationFromVector(phi);
        for (const sign of [1, -1]) {
          const back = vectorFromRotation(q.map((number) => sign * number) as unknown as Quaternion);
          for (let k = 0; k < 3; k++) expect(Math.abs(back[k]! - phi[k]!)).toBeLessThan(turnRounding);
        }
      }),
    );
  });

  test("the logarithm's derivative predicts Log(Exp(ψ) Exp(φ)) to second order", () => {
    fc.assert(
      fc.property(
        turnVector.filter((phi) => Math.hypot(...phi) < 2.8),
        turnVector,
        (phi, direction) => {
          const h = 1e-5;
          const at = (scale: number) =>
            vectorFromRotation(
              multiplyQuaternions(
                rotationFromVector(direction.map((number) => scale * number) as [number, number, number]),
                rotationFromVector(phi),
              ),
            );
          const [ahead, behind] = [at(h), at(-h)];
          const slope = apply(logarithmDerivative(phi), direction);
          // Central differences: third derivative × h² × |direction|³, large near a half turn, and ε/h.
          for (let k = 0; k < 3; k++) expect(Math.abs((ahead[k]! - behind[k]!) / (2 * h) - slope[k]!)).toBeLessThan(1e-7);
        },
      ),
    );
  });

  test("a spatial pose keeps its quaternion of unit length through many steps", () => {
    let pose = stateKinds["spatial-pose"].normalize([0, 0, 0, 1, 0, 0, 0]);
    for (let k = 0; k < 10_000; k++) pose = stateKinds["spatial-pose"].retract(pose, [0, 0, 0, 0.3, -0.2, 0.1]);
    expect(Math.abs(Math.hypot(...attitude(pose)) - 1)).toBeLessThanOrEqual(4 * Number.EPSILON); // what normalizing lets pass
  });
});
