import fc from "fast-check";
import { describe, expect, test, vi } from "vitest";
import { type JacobianWarning, type OwnFunction, ownFunction } from "../../src/model/own-function.js";
import { type StateAt, stateKinds } from "../../src/model/states.js";
import { real } from "./arbitraries.js";

const scalars = (...numbers: number[]): StateAt[] =>
  numbers.map((number, k) => ({ name: `b${k + 1}`, kind: stateKinds.scalar, value: Float64Array.of(number) }));

/** A saturating exponential with its derivative worked by hand. */
const saturation = (x: number, more: Partial<OwnFunction> = {}): OwnFunction => ({
  name: "saturation",
  states: ["scalar", "scalar"],
  predict: ([b1, b2]) => [b1![0]! * (1 - Math.exp(-b2![0]! * x))],
  ...more,
});
const derivative =
  (x: number): OwnFunction["jacobians"] =>
  ([b1, b2]) => [[1 - Math.exp(-b2![0]! * x)], [b1![0]! * x * Math.exp(-b2![0]! * x)]];
const anything = Float64Array.of(0);

describe("a function of the user's own", () => {
  test("central differences give its derivative to ten digits, also for parameters of very different size", () => {
    fc.assert(
      fc.property(real(1, 1e6), real(1e-6, 1e-2), real(1, 300), (b1, b2, x) => {
        const form = ownFunction(saturation(x)).forms[0]!;
        const exact = derivative(x)!([Float64Array.of(b1), Float64Array.of(b2)]);
        const numerical = form.jacobians(scalars(b1, b2), anything);
        for (const k of [0, 1]) {
          const scale = k === 0 ? 1 : b1 / b2; // d/db2 has the rounding of f / b2
          expect(Math.abs(numerical[k]![0]! - exact[k]![0]!)).toBeLessThan(1e-10 * (Math.abs(exact[k]![0]!) + scale * 1e-2));
        }
      }),
    );
  });

  test("a right Jacobian passes without a word; a wrong sign or a wrong unit is told once, with both numbers", () => {
    const silent = vi.fn();
    ownFunction(saturation(100, { jacobians: derivative(100)!, onWarning: silent })).forms[0]!.jacobians(scalars(250, 5e-4), anything);
    expect(silent).not.toHaveBeenCalled();

    for (const spoil of [-1, 200 / Math.PI, 1.001]) {
      const warnings: JacobianWarning[] = [];
      const jacobians: OwnFunction["jacobians"] = (values) => {
        const [first, second] = derivative(100)!(values);
        return [first!, [second![0]! * spoil]];
      };
      const form = ownFunction(saturation(100, { jacobians, onWarning: (warning) => warnings.push(warning) })).forms[0]!;
      form.jacobians(scalars(250, 5e-4), anything);
      form.jacobians(scalars(250, 5e-4), anything);
      expect(warnings).toHaveLength(1);
      expect(warnings[0]).toMatchObject({ code: "JACOBIAN_DISAGREES", state: 1, row: 0, column: 0 });
      expect(warnings[0]!.given / warnings[0]!.numerical).toBeCloseTo(spoil, 6);
      expect(warnings[0]!.message).toContain('"saturation" with respect to "b2"');
    }
  });

  test("an angle it predicts wraps, in the residual and in the central differences", () => {
    const kind = ownFunction({
      name: "heading",
      states: ["scalar"],
      quantities: ["angle"],
      predict: ([s]) => [Math.atan2(Math.sin(s![0]!), Math.cos(s![0]!))],
    });
    const form = kind.forms[0]!;
    expect(form.residual(scalars(Math.PI - 0.1), Float64Array.of(-Math.PI + 0.1))[0]).toBeCloseTo(0.2, 14);
    expect(form.jacobians(scalars(Math.PI), anything)[0]![0]).toBeCloseTo(1, 9);
  });

  test("a parameter that has shrunk next to zero still gets a derivative", () => {
    const form = ownFunction({ name: "offset", states: ["scalar"], predict: ([b]) => [20 + 3 * b![0]!] }).forms[0]!;
    for (const b of [0, 1e-25, 1e-12, -1e-6]) expect(form.jacobians(scalars(b), anything)[0]![0]).toBeCloseTo(3, 4); // rounding may take a share of 1e-5
  });

  test("on a spatial pose the central differences are taken in local coordinates", () => {
    const height = ownFunction({ name: "height", states: ["spatial-pose"], predict: ([pose]) => [pose![2]!] }).forms[0]!;
    const pose: StateAt = { name: "T", kind: stateKinds["spatial-pose"], value: Float64Array.of(1, 2, 3, 1, 0, 0, 0) };
    const [row] = height.jacobians([pose], anything);
    expect(row).toHaveLength(6);
    for (const [k, entry] of row!.entries()) expect(entry).toBeCloseTo(k === 2 ? 1 : 0, 10);
  });

  test("what it returns is checked: lengths, finite numbers", () => {
    const with_ = (more: Partial<OwnFunction>) => ownFunction(saturation(1, more)).forms[0]!;
    expect(() => with_({ predict: () => [1, 2] }).predict(scalars(1, 1))).toThrowError(/prediction has 2 numbers where 1 are needed/);
    expect(() => with_({ predict: () => [Number.NaN] }).predict(scalars(1, 1))).toThrowError(/prediction is NaN at position 0/);
    expect(() => with_({ jacobians: () => [[1]] }).jacobians(scalars(1, 1), anything)).toThrowError(/Jacobians number 1, its states 2/);
    expect(() => with_({ jacobians: () => [[1], [1, 2]] }).jacobians(scalars(1, 1), anything)).toThrowError(
      /Jacobian on state 1 has 2 numbers/,
    );
  });

  test("it cannot spoil the states it is shown", () => {
    const states = scalars(3, 4);
    const spoiling: OwnFunction["predict"] = (values) => {
      for (const value of values) value.fill(99);
      return [0];
    };
    ownFunction(saturation(1, { predict: spoiling })).forms[0]!.predict(states);
    expect(states.map((state) => state.value[0])).toEqual([3, 4]);
  });
});
