import fc from "fast-check";
import { describe, expect, test } from "vitest";
import type { Reading, StateDeclaration } from "../../src/model/reading.js";
import type { Setup } from "../../src/model/reading-form.js";
import { findForm, type ReadingKindName, readingKinds } from "../../src/model/reading-kinds.js";
import { startingValues } from "../../src/model/starting/starting-values.js";
import { type StateAt, type StateKindName, stateKinds } from "../../src/model/states.js";
import { real, stateOf } from "./arbitraries.js";

type Truth = Record<string, StateAt>;
const at = (kind: StateKindName, ...value: number[]): StateAt => ({
  name: kind,
  kind: stateKinds[kind],
  value: stateKinds[kind].normalize(value),
});

/** The reading that the true states would give. */
function exact(truth: Truth, kind: ReadingKindName, states: string[], setup?: Setup): Reading {
  const form = findForm(
    readingKinds[kind],
    states.map((state) => truth[state]!.kind.name),
  )!;
  const value = form.predict(
    states.map((state) => truth[state]!),
    setup,
  );
  return {
    kind,
    states,
    value,
    standardDeviations: form.rowQuantities.reduce((ones, _, k) => ones.fill(1, k), new Float64Array(form.rowQuantities.length)),
    ...(setup ? { setup } : {}),
  };
}

/** Starting values from exact readings, the states named in `given` known. */
function start(truth: Truth, given: string[], readings: Reading[]) {
  const states = Object.entries(truth).map(
    ([name, { kind, value }]): StateDeclaration => ({ name, kind: kind.name, fixed: false, ...(given.includes(name) ? { value } : {}) }),
  );
  return startingValues(states, readings);
}

function expectTruth(truth: Truth, given: string[], readings: Reading[], tolerance = 1e-6): void {
  const { values, missing } = start(truth, given, readings);
  expect(missing).toEqual([]);
  expect([...values.keys()]).toEqual(Object.keys(truth));
  for (const [name, { kind, value }] of Object.entries(truth))
    for (const number of kind.local(values.get(name)!.value, value)) expect(Math.abs(number), name).toBeLessThan(tolerance);
}

/** Three marks that are not near one line, and a point well away from them and from the circle through them. */
const planFigure = fc
  .tuple(...([1, 2, 3, 4] as const).map(() => fc.tuple(real(-300, 300), real(-300, 300))))
  .filter((points) => {
    const [a, b, c, p] = points as unknown as [number[], number[], number[], number[]];
    const area = (b[0]! - a[0]!) * (c[1]! - a[1]!) - (b[1]! - a[1]!) * (c[0]! - a[0]!);
    const apart = points.every((one, i) => points.slice(0, i).every((two) => Math.hypot(one[0] - two[0], one[1] - two[1]) > 30));
    const centre = circumcentre(a, b, c);
    const radius = Math.hypot(a[0]! - centre[0], a[1]! - centre[1]);
    return Math.abs(area) > 5000 && apart && Math.abs(Math.hypot(p[0]! - centre[0], p[1]! - centre[1]) - radius) > 10;
  })
  .map(
    ([a, b, c, p]): Truth => ({
      A: at("point-2d", ...a!),
      B: at("point-2d", ...b!),
      C: at("point-2d", ...c!),
      P: at("point-2d", ...p!),
      o: at("orientation", 1.1),
    }),
  );

function circumcentre([ax, ay]: number[], [bx, by]: number[], [cx, cy]: number[]): [number, number] {
  const d = 2 * (ax! * (by! - cy!) + bx! * (cy! - ay!) + cx! * (ay! - by!));
  const [a, b, c] = [ax! ** 2 + ay! ** 2, bx! ** 2 + by! ** 2, cx! ** 2 + cy! ** 2];
  return [(a * (by! - cy!) + b * (cy! - ay!) + c * (ay! - by!)) / d, (a * (cx! - bx!) + b * (ax! - cx!) + c * (bx! - ax!)) / d];
}

describe("starting values from exact readings find the true point", () => {
  /** Arcs next to a straight line lose centimetres (see `narrowestArc`); a tenth of a metre starts any adjustment. */
  const inPlan = (name: string, readings: (truth: Truth) => Reading[]) =>
    test(name, () => {
      fc.assert(fc.property(planFigure, (truth) => expectTruth(truth, ["A", "B", "C"], readings(truth), 0.1)));
    });
  const oriented = (truth: Truth, station: string, targets: string[]) =>
    targets.map((target) => exact(truth, "direction", [station, target, "o"]));

  inPlan("polar, the set oriented by a sight to a known mark", (truth) => [
    ...oriented(truth, "A", ["B", "P"]),
    exact(truth, "distance", ["P", "A"]),
  ]);
  inPlan("three distances, the third choosing between two places", (truth) => [
    ...["A", "B", "C"].map((mark) => exact(truth, "distance", [mark, "P"])),
    ...oriented(truth, "A", ["B"]),
  ]);
  inPlan("azimuths from and to known marks", (truth) => [
    exact(truth, "azimuth", ["A", "P"]),
    exact(truth, "azimuth", ["P", "B"]),
    exact(truth, "azimuth", ["C", "P"]),
    ...oriented(truth, "A", ["B"]),
  ]);
  inPlan("resection: three directions from the point, then its orientation", (truth) => oriented(truth, "P", ["A", "B", "C"]));
  inPlan("resection by two angles", (truth) => [
    exact(truth, "angle", ["P", "A", "B"]),
    exact(truth, "angle", ["P", "C", "B"]),
    ...oriented(truth, "A", ["B"]),
  ]);
  inPlan("angles at known marks, sighting the point as foresight and as backsight", (truth) => [
    exact(truth, "angle", ["A", "B", "P"]),
    exact(truth, "angle", ["B", "P", "C"]),
    exact(truth, "angle", ["C", "A", "P"]),
    ...oriented(truth, "A", ["B"]),
  ]);
  inPlan("a distance and an angle", (truth) => [
    exact(truth, "distance", ["A", "P"]),
    exact(truth, "angle", ["A", "B", "P"]),
    ...oriented(truth, "A", ["B"]),
  ]);
  inPlan("a coordinate difference, either way", (truth) => [
    exact(truth, "coordinate-difference", ["P", "A"]),
    ...oriented(truth, "A", ["B"]),
  ]);

  test("a traverse of total station sights in space goes from pillar to pillar", () => {
    const point = fc.tuple(real(0, 80), real(0, 80), real(-5, 5));
    fc.assert(
      fc.property(fc.array(point, { minLength: 4, maxLength: 8 }), fc.boolean(), (offsets, backwards) => {
        const truth: Truth = {};
        for (const [k, [dx, dy, dz]] of offsets.entries()) truth[`P${k}`] = at("point-3d", 150 * k + dx, 100 * (k % 2) + dy, dz);
        const names = Object.keys(truth);
        const readings = names.slice(1).flatMap((to, k) => {
          const [station, target] = backwards ? [to, names[k]!] : [names[k]!, to];
          const setup = { instrumentHeight: 1.6, targetHeight: 2.1 };
          return [
            exact(truth, "azimuth", [station, target]),
            exact(truth, "slope-distance", [station, target], setup),
            exact(truth, "zenith-angle", [station, target], setup),
          ];
        });
        // With unequal heights over the marks, the slope laid flat by the zenith angle is the plan distance, whatever the heights.
        expectTruth(truth, ["P0"], readings.reverse());
      }),
    );
  });

  test("a slope distance is laid flat by a levelled height", () => {
    fc.assert(
      fc.property(real(-20, 20), (dz) => {
        const truth: Truth = { A: at("point-3d", 0, 0, 10), P: at("point-3d", 60, 80, 10 + dz) };
        expectTruth(
          truth,
          ["A"],
          [
            exact(truth, "height-difference", ["P", "A"]),
            exact(truth, "slope-distance", ["P", "A"], { instrumentHeight: 1.5 }),
            exact(truth, "azimuth", ["A", "P"]),
          ],
        );
      }),
    );
  });

  for (const kind of ["planar-pose", "spatial-pose"] as const)
    test(`${kind}: along a chain of steps, forwards and backwards`, () => {
      fc.assert(
        fc.property(fc.array(stateOf(kind), { minLength: 3, maxLength: 7 }), fc.nat(6), (poses, from) => {
          const truth: Truth = Object.fromEntries(poses.map((pose, k) => [`x${k}`, pose]));
          const readings = poses
            .slice(1)
            .map((_, k) => exact(truth, "relative-pose", k % 2 ? [`x${k}`, `x${k + 1}`] : [`x${k + 1}`, `x${k}`]));
          expectTruth(truth, [`x${from % poses.length}`], readings);
          expectTruth(truth, [], [...readings, exact(truth, "pose", [`x${from % poses.length}`])]);
        }),
      );
    });

  test("a vehicle by two marks that it sees, and a third mark by the vehicle", () => {
    fc.assert(
      fc.property(stateOf("planar-pose"), fc.tuple(real(5, 90), real(-90, -5)), (vehicle, [u, v]) => {
        const near = (dx: number, dy: number) => at("point-2d", vehicle.value[0]! + dx, vehicle.value[1]! + dy);
        const truth: Truth = { x: vehicle, A: near(u, v), B: near(v, u), C: near(u, u) };
        expectTruth(
          truth,
          ["A", "B"],
          ["A", "B", "C"].map((mark) => exact(truth, "range-bearing", ["x", mark])),
        );
      }),
    );
  });

  test("numbers: heights along a levelled line, clocks and scalars by differences, an orientation by a scalar reading", () => {
    const truth: Truth = {
      ...{ H0: at("height", 12.5), H1: at("height", 14), H2: at("height", 9.25), Q: at("point-3d", 1, 2, 30) },
      ...{ c: at("clock-offset", 1e-3), d: at("clock-offset", 3e-3), s: at("scalar", 7), o: at("orientation", 3) },
    };
    expectTruth(
      truth,
      ["Q"],
      [
        exact(truth, "height-difference", ["H1", "H2"]),
        exact(truth, "height-difference", ["H1", "H0"]),
        exact(truth, "height-difference", ["Q", "H0"]),
        exact(truth, "scalar", ["d"]),
        exact(truth, "scalar-difference", ["c", "d"]),
        exact(truth, "scalar", ["s"]),
        exact(truth, "scalar", ["o"]),
      ],
    );
  });
});

describe("what readings do not tie down is named", () => {
  const truth: Truth = { A: at("point-2d", 0, 0), B: at("point-2d", 100, 0), P: at("point-2d", 40, 70), o: at("orientation", 0.4) };

  test("two distances fit two places", () => {
    const { missing } = start({ ...truth }, ["A", "B", "o"], [exact(truth, "distance", ["A", "P"]), exact(truth, "distance", ["B", "P"])]);
    expect(missing).toEqual([{ name: "P", why: "ambiguous" }]);
  });

  test("a third distance from the same line does not choose either", () => {
    const more = { ...truth, C: at("point-2d", 180, 0) };
    const readings = ["A", "B", "C"].map((mark) => exact(more, "distance", [mark, "P"]));
    expect(start(more, ["A", "B", "C", "o"], readings).missing).toEqual([{ name: "P", why: "ambiguous" }]);
  });

  test("one distance, a set without a known target, a pose without a heading stay open", () => {
    const pose = { ...truth, x: at("planar-pose", 1, 2, 0) };
    const readings = [exact(pose, "distance", ["A", "P"]), exact(pose, "direction", ["A", "P", "o"]), exact(pose, "position", ["x"])];
    expect(start(pose, ["A", "B"], readings).missing).toEqual([
      { name: "P", why: "open" },
      { name: "o", why: "open" },
      { name: "x", why: "open" },
    ]);
  });

  test("a given value is kept as it is", () => {
    const rough = { ...truth, P: at("point-2d", 41, 71) };
    const { values } = start(rough, ["A", "B", "P", "o"], [exact(truth, "position", ["P"])]);
    expect(values.get("P")!.value).toEqual(Float64Array.of(41, 71));
  });
});

test("noisy distances that only just fail to meet still give a place near the truth", () => {
  fc.assert(
    fc.property(planFigure, fc.tuple(real(-0.05, 0.05), real(-0.05, 0.05), real(-0.05, 0.05)), (truth, noise) => {
      const readings = ["A", "B", "C"].map((mark, k) => {
        const reading = exact(truth, "distance", [mark, "P"]);
        return { ...reading, value: reading.value.map((number) => number + noise[k]!) };
      });
      const { values, missing } = start(truth, ["A", "B", "C", "o"], readings);
      // An unlucky figure may stay ambiguous under noise, but a place that is given is the right one.
      const found = values.get("P")?.value;
      if (found === undefined) expect(missing).toEqual([{ name: "P", why: "ambiguous" }]);
      else expect(Math.hypot(found[0]! - truth.P!.value[0]!, found[1]! - truth.P!.value[1]!)).toBeLessThan(10);
    }),
  );
});
