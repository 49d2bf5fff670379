import { inverse, Matrix } from "ml-matrix";
import { describe, expect, test } from "vitest";
import { applyEntry } from "../../src/log/apply.js";
import { readLog } from "../../src/log/reader.js";
import { Adjustment, type AdjustmentOptions } from "../../src/model/adjustment.js";
import { centralDifferences } from "../../src/model/central-differences.js";
import { type OwnFunction, ownFunction } from "../../src/model/own-function.js";
import type { Reading } from "../../src/model/reading.js";
import { findForm, type ReadingKindName, readingKinds } from "../../src/model/reading-kinds.js";
import { cauchy, huber, tukey } from "../../src/model/robust.js";
import { rotationFromVector } from "../../src/model/rotations.js";
import { type StateAt, type StateKindName, stateKinds } from "../../src/model/states.js";
import { type Random, random } from "../../src/support/random.js";
import { DenseEstimate } from "../support/dense-estimate.js";

type Truth = Record<string, StateAt>;
const at = (kind: StateKindName, ...value: number[]): StateAt => ({
  name: kind,
  kind: stateKinds[kind],
  value: stateKinds[kind].normalize(value),
});

function reading(
  truth: Truth,
  kind: ReadingKindName,
  states: string[],
  deviation: number,
  noise?: Random,
  more: Partial<Reading> = {},
): Reading {
  const form = findForm(
    readingKinds[kind],
    states.map((state) => truth[state]!.kind.name),
  )!;
  const exact = form.predict(states.map((state) => truth[state]!));
  const value = noise && form.rowQuantities.length === exact.length ? exact.map((number) => number + deviation * noise.normal()) : exact;
  return { kind, states, value, standardDeviations: new Float64Array(form.rowQuantities.length).fill(deviation), ...more };
}

function adjustmentOf(truth: Truth, known: Record<string, "fixed" | "start">, options?: AdjustmentOptions) {
  const estimate = new DenseEstimate();
  const adjustment = new Adjustment(estimate, options);
  for (const [name, { kind, value }] of Object.entries(truth))
    adjustment.addState({ name, kind: kind.name, fixed: known[name] === "fixed", ...(known[name] ? { value } : {}) });
  return { estimate, adjustment };
}

/** A braced quadrilateral: two known points, two new ones, every distance and every direction. */
const quadrilateral: Truth = {
  ...{ A: at("point-2d", 0, 0), B: at("point-2d", 400, 30), P: at("point-2d", 350, 320), Q: at("point-2d", -40, 290) },
  ...{ oA: at("orientation", 0.3), oB: at("orientation", -2), oP: at("orientation", 1.5), oQ: at("orientation", 3) },
};
const held = { A: "fixed", B: "fixed" } as const;
function quadrilateralReadings(noise?: Random): Reading[] {
  const corners = ["A", "B", "P", "Q"];
  return corners.flatMap((from, i) =>
    corners.flatMap((to, j) => [
      ...(i === j ? [] : [reading(quadrilateral, "direction", [from, to, `o${from}`], 1e-5, noise, { name: `${from}${to}` })]),
      ...(i < j && !(from === "A" && to === "B")
        ? [reading(quadrilateral, "distance", [from, to], 0.003, noise, { name: `${from}-${to}` })]
        : []),
    ]),
  );
}

/** (Jᵀ R⁻¹ J)⁻¹ by central differences of the whitened residuals at the adjusted values: the covariance from outside. */
function covarianceByDifferences(adjustment: Adjustment): Map<string, Matrix> {
  const states = [...adjustment.states()]
    .filter(({ fixed }) => !fixed)
    .map(({ name, kind, value }): StateAt => ({ name, kind: stateKinds[kind as StateKindName], value: value! }));
  const rows: number[][] = [];
  for (const { reading } of adjustment.readings()) {
    const stateAt = (name: string) =>
      states.find((state) => state.name === name) ?? { name, kind: stateKinds["point-2d"], value: adjustment.value(name) };
    const on = reading.states.map(stateAt);
    const form = findForm(
      readingKinds[reading.kind as ReadingKindName],
      on.map((state) => state.kind.name),
    )!;
    const block = states.flatMap((state) => {
      const slot = reading.states.indexOf(state.name);
      if (slot < 0) return Array.from({ length: state.kind.dimension }, () => new Array<number>(form.rowQuantities.length).fill(0));
      const { values } = centralDifferences(state, (value) =>
        form.residual(
          on.map((other, k) => (k === slot ? { ...other, value } : other)),
          reading.value,
        ),
      );
      return Array.from({ length: state.kind.dimension }, (_, j) =>
        Array.from(form.rowQuantities, (_, i) => values[i * state.kind.dimension + j]! / reading.standardDeviations![i]!),
      );
    });
    for (let i = 0; i < form.rowQuantities.length; i++) rows.push(block.map((column) => column[i]!));
  }
  const j = new Matrix(rows);
  const sigma = inverse(j.transpose().mmul(j));
  let place = 0;
  return new Map(
    states.map(({ name, kind }) => {
      const from = place;
      place += kind.dimension;
      return [name, sigma.subMatrix(from, place - 1, from, place - 1)];
    }),
  );
}

function expectCovariances(adjustment: Adjustment) {
  for (const [name, expected] of covarianceByDifferences(adjustment)) {
    const found = adjustment.covariance(name);
    const n = expected.rows;
    for (let k = 0; k < n * n; k++) {
      const scale = Math.sqrt(expected.get(Math.floor(k / n), Math.floor(k / n)) * expected.get(k % n, k % n));
      // Jacobians are taken where they are within a ten-thousandth of the solution's, so covariances are to a few of these.
      expect(Math.abs(found[k]! - expected.get(Math.floor(k / n), k % n)) / scale, `${name} ${k}`).toBeLessThan(5e-4);
    }
  }
}

describe("an adjustment", () => {
  test("from exact readings a triangulated quadrilateral comes to the true points, started from nothing but its readings", () => {
    const { adjustment } = adjustmentOf(quadrilateral, held);
    for (const one of quadrilateralReadings()) adjustment.addReading(one);
    const { started } = adjustment.solve();
    expect([...started].sort()).toEqual(["P", "Q", "oA", "oB", "oP", "oQ"]);
    // A thousandth of the millimetres that the readings leave open.
    for (const [name, { kind, value }] of Object.entries(quadrilateral))
      for (const off of kind.local(value, adjustment.value(name))) expect(Math.abs(off)).toBeLessThan(1e-5);
    expect(adjustment.cost()).toBeLessThan(1e-4);
  });

  test("its covariances are those of the Jacobian by central differences, scaled by nothing", () => {
    const { adjustment } = adjustmentOf(quadrilateral, held);
    for (const one of quadrilateralReadings(random(5))) adjustment.addReading(one);
    adjustment.solve();
    expectCovariances(adjustment);
    expect(adjustment.covariance("A")).toEqual(new Float64Array(4));
  });

  test("readings, residuals and weights are told as they stand", () => {
    const { adjustment } = adjustmentOf(quadrilateral, held);
    const given = quadrilateralReadings(random(5));
    for (const one of given) adjustment.addReading(one);
    expect([...adjustment.readings()]).toEqual([]);
    adjustment.solve();
    const all = [...adjustment.readings()];
    expect(all.map(({ reading }) => reading)).toEqual(given);
    const squares = all.reduce((sum, { residual, reading }) => sum + (residual[0]! / reading.standardDeviations![0]!) ** 2, 0);
    expect(adjustment.cost()).toBeCloseTo(squares, 6);
    expect(all.every(({ weight }) => weight === 1)).toBe(true);
  });

  test("a far start is damped to the solution, and the damping leaves no trace in the covariance", () => {
    const decay = (b: readonly Float64Array[], x: number) => [b[0]![0]! * Math.exp(-b[1]![0]! * x)];
    const solveFrom = (start: [number, number]) => {
      const estimate = new DenseEstimate();
      const adjustment = new Adjustment(estimate, { linearizationTolerance: 1e-6 });
      for (const [k, value] of start.entries())
        adjustment.addState({ name: `b${k}`, kind: "scalar", fixed: false, value: Float64Array.of(value) });
      for (let x = 0; x < 10; x++)
        adjustment.addReading({
          kind: ownFunction({ name: "decay", states: ["scalar", "scalar"], predict: (b) => decay(b, x) }),
          states: ["b0", "b1"],
          value: Float64Array.of(10 * Math.exp(-0.7 * x) + 0.01 * Math.sin(5 * x)),
          standardDeviations: Float64Array.of(0.01),
        });
      return { estimate, adjustment, report: adjustment.solve() };
    };
    const near = solveFrom([10, 0.7]);
    const far = solveFrom([1, 4]);
    expect(near.report.iterations.every(({ damping }) => damping === 0)).toBe(true);
    expect(far.report.iterations.some(({ damping, accepted }) => damping > 0 && accepted)).toBe(true);
    expect(far.report.iterations.at(-1)!.damping).toBe(0);
    expect(far.estimate.measurements).toBe(10);
    for (const name of ["b0", "b1"]) {
      expect(far.adjustment.value(name)[0]).toBeCloseTo(near.adjustment.value(name)[0]!, 7);
      expect(far.adjustment.covariance(name)[0]! / near.adjustment.covariance(name)[0]!).toBeCloseTo(1, 5);
    }
  });

  test("a new reading at one end of a long traverse leaves the linear models at the other end alone", () => {
    const truth: Truth = Object.fromEntries(
      Array.from({ length: 40 }, (_, k) => [`x${k}`, at("planar-pose", 2 * k, Math.sin(k / 4), 0.1 * Math.cos(k / 4))]),
    );
    const noise = random(11);
    const { adjustment, estimate } = adjustmentOf(truth, {});
    adjustment.addReading(reading(truth, "pose", ["x0"], 0.01));
    for (let k = 1; k < 40; k++) adjustment.addReading(reading(truth, "relative-pose", [`x${k - 1}`, `x${k}`], 0.01, noise));
    adjustment.solve();
    estimate.replaced = [];
    adjustment.addReading(reading(truth, "relative-pose", ["x37", "x39"], 0.01, noise));
    const { iterations } = adjustment.solve();
    expect(iterations.length).toBeLessThanOrEqual(3);
    // Measurement k ties x(k−1) to x(k).
    expect(Math.min(40, ...estimate.replaced)).toBeGreaterThan(36);
    expectCovariances(adjustment);
  });

  test("a withdrawn reading is as if it had never come", () => {
    const [first, second] = [adjustmentOf(quadrilateral, held), adjustmentOf(quadrilateral, held)];
    for (const one of quadrilateralReadings(random(8))) {
      first.adjustment.addReading(one);
      if (one.name !== "A-P") second.adjustment.addReading(one);
    }
    first.adjustment.solve();
    first.adjustment.withdraw("A-P");
    first.adjustment.solve();
    second.adjustment.solve();
    for (const name of ["P", "Q"])
      for (const k of [0, 1]) expect(first.adjustment.value(name)[k]).toBeCloseTo(second.adjustment.value(name)[k]!, 6);
    expect(() => first.adjustment.withdraw("A-P")).toThrowError(/no reading "A-P"/);
  });

  test("robust weights keep a blunder among exact readings from pulling: Huber's in part, Cauchy's almost, Tukey's quite", () => {
    const pull = (robust?: AdjustmentOptions["robust"]) => {
      const { adjustment } = adjustmentOf(quadrilateral, held, robust ? { robust } : {});
      for (const one of quadrilateralReadings())
        adjustment.addReading(one.name === "A-P" ? { ...one, value: one.value.map((number) => number + 0.25) } : one);
      adjustment.solve();
      const [x, y] = adjustment.value("P");
      const weight = [...adjustment.readings()].find(({ reading }) => reading.name === "A-P")!.weight;
      return { off: Math.hypot(x! - 350, y! - 320), weight };
    };
    const [plain, byHuber, byCauchy, byTukey] = [pull(), pull(huber()), pull(cauchy()), pull(tukey())];
    expect(plain.off).toBeGreaterThan(0.02);
    expect(byHuber.off).toBeLessThan(plain.off / 4);
    expect(byCauchy.off).toBeLessThan(byHuber.off / 4);
    expect([plain.weight, byTukey.weight]).toEqual([1, 0]);
    // A thousandth of the millimetres that exact readings leave open.
    expect(byTukey.off).toBeLessThan(1e-5);
  });

  test("a ring of spatial poses with large turns closes, and its covariances are in local coordinates at the solution", () => {
    const truth: Truth = Object.fromEntries(
      Array.from({ length: 12 }, (_, k) => [
        `T${k}`,
        at("spatial-pose", 5 * Math.cos(k / 2), 5 * Math.sin(k / 2), k / 5, ...rotationFromVector([0.4 * k, -0.3 * k, (k * Math.PI) / 6])),
      ]),
    );
    const noise = random(21);
    const { adjustment } = adjustmentOf(truth, {});
    adjustment.addReading(reading(truth, "pose", ["T0"], 0.01));
    const spatial = stateKinds["spatial-pose"];
    for (let k = 0; k < 12; k++) {
      const exact = reading(truth, "relative-pose", [`T${k}`, `T${(k + 1) % 12}`], 0.02);
      // Steps noisy enough that the last poses start far from where the ring puts them.
      adjustment.addReading({
        ...exact,
        value: spatial.retract(
          exact.value,
          Float64Array.from({ length: 6 }, () => 0.02 * noise.normal()),
        ),
      });
    }
    adjustment.solve();
    for (const [name, { value }] of Object.entries(truth))
      for (const off of spatial.local(value, adjustment.value(name))) expect(Math.abs(off)).toBeLessThan(0.4);
    expect(adjustment.cost()).toBeLessThan(30); // χ² of 6 degrees of freedom passes 30 once in 25 000
    expectCovariances(adjustment);
  });

  test("states can be forgotten: the others keep their values and covariances, and go on", () => {
    const truth: Truth = Object.fromEntries(
      Array.from({ length: 8 }, (_, k) => [`x${k}`, at("planar-pose", 6 * k, 0.2 * k * k, 0.07 * k)]),
    );
    const noise = random(4);
    const { adjustment, estimate } = adjustmentOf(truth, {});
    adjustment.addReading(reading(truth, "pose", ["x0"], 0.01, noise));
    for (let k = 1; k < 8; k++) adjustment.addReading(reading(truth, "relative-pose", [`x${k - 1}`, `x${k}`], 0.01, noise));
    adjustment.solve();
    const before = ["x5", "x7"].map((name) => [adjustment.value(name), adjustment.covariance(name)]);
    adjustment.forget(["x0", "x1", "x2", "x3", "x4"]);
    for (const [k, name] of ["x5", "x7"].entries())
      for (const [part, found] of [adjustment.value(name), adjustment.covariance(name)].entries())
        for (const [i, number] of found.entries()) expect(number).toBeCloseTo(before[k]![part]![i]!, 9);
    expect(estimate.measurements).toBe(2);
    adjustment.addReading(reading(truth, "position", ["x7"], 0.001));
    adjustment.solve();
    expect(Math.hypot(adjustment.value("x7")[0]! - 42, adjustment.value("x7")[1]! - 9.8)).toBeLessThan(0.004);
    expect(() => adjustment.value("x3")).toThrowError(/no state "x3"/);
  });

  test("a log drives it entry by entry", async () => {
    const log = [
      '{"log":"sigmatide/1","deviationUnits":{"length":"mm"}}',
      '{"state":"A","kind":"height","value":10,"fixed":true}\n{"state":"B","kind":"height"}\n{"state":"C","kind":"height"}',
      '{"reading":"height-difference","states":["A","B"],"value":1,"standardDeviations":1}',
      '{"reading":"height-difference","states":["B","C"],"value":2,"standardDeviations":1,"name":"bad"}',
      '{"comment":"levelled again"}\n{"withdraw":"bad"}',
      '{"reading":"height-difference","states":["B","C"],"value":3,"standardDeviations":1}\n{"forget":"B"}',
    ];
    const adjustment = new Adjustment(new DenseEstimate());
    for await (const entry of readLog(log.join("\n"))) applyEntry(adjustment, entry);
    adjustment.solve();
    expect(adjustment.value("C")[0]).toBeCloseTo(14, 12);
    expect(adjustment.covariance("C")[0]).toBeCloseTo(2e-6, 15);
    expect([...adjustment.states()].map(({ name, fixed }) => [name, fixed])).toEqual([
      ["A", true],
      ["C", false],
    ]);
  });
});

describe("an adjustment that cannot succeed says why, and stays usable", () => {
  test("states that the readings leave open are named by the estimate; one more reading mends it", () => {
    const { adjustment } = adjustmentOf(quadrilateral, { ...held, P: "start" });
    adjustment.addReading(reading(quadrilateral, "distance", ["A", "P"], 0.01));
    expect(() => adjustment.solve()).toThrowError(/do not determine P/);
    expect(adjustment.value("P")).toEqual(Float64Array.of(350, 320));
    adjustment.addReading(reading(quadrilateral, "distance", ["B", "P"], 0.01));
    adjustment.solve();
    expect(adjustment.covariance("P")[0]).toBeGreaterThan(0);
  });

  test("states without a starting value are named, those with two places apart", () => {
    const { adjustment, estimate } = adjustmentOf(quadrilateral, held);
    adjustment.addReading(reading(quadrilateral, "distance", ["A", "P"], 0.01));
    adjustment.addReading(reading(quadrilateral, "distance", ["B", "P"], 0.01));
    adjustment.addReading(reading(quadrilateral, "distance", ["P", "Q"], 0.01));
    expect(() => adjustment.solve()).toThrowError(/follows from the readings for "P" \(two places fit its readings\), "Q"/);
    expect(estimate.commits).toBe(0);
    expect(() => adjustment.value("P")).toThrowError(/no value yet/);
  });

  test("a start where a reading cannot be predicted, readings that no step brings nearer, iterations that run out", () => {
    const one = (predict: (b: number) => number, start: number, options: AdjustmentOptions = {}, jacobians?: OwnFunction["jacobians"]) => {
      const adjustment = new Adjustment(new DenseEstimate(), options);
      adjustment.addState({ name: "b", kind: "scalar", fixed: false, value: Float64Array.of(start) });
      const kind = ownFunction({ name: "f", states: ["scalar"], predict: ([b]) => [predict(b![0]!)], ...(jacobians ? { jacobians } : {}) });
      adjustment.addReading({ kind, states: ["b"], value: Float64Array.of(1), standardDeviations: Float64Array.of(0.1), name: "r" });
      return adjustment;
    };
    expect(() => one((b) => Math.log(b), -1).solve()).toThrowError(/"f" cannot be used: its prediction is NaN/);
    // A derivative of the wrong sign leads uphill, whatever the step.
    const wrong = one(
      (b) => 5 * b,
      1,
      {},
      () => [[-5]],
    );
    expect(() => wrong.solve()).toThrowError(/No step makes the readings fit better.*Worst fit: r \(40\.0 standard deviations\)/);
    expect(wrong.value("b")).toEqual(Float64Array.of(1));
    const slow = one((b) => b ** 3, 300, { maximumIterations: 4 });
    expect(() => slow.solve()).toThrowError(/has not converged in 4 iterations/);
    expect(slow.value("b")).toEqual(Float64Array.of(300));
  });

  test("after a failed solve the bad reading can be withdrawn and the rest is right", () => {
    const { adjustment } = adjustmentOf(quadrilateral, held, { maximumIterations: 12 });
    for (const one of quadrilateralReadings(random(6))) adjustment.addReading(one);
    adjustment.solve();
    const before = adjustment.value("P");
    const jump = ownFunction({ name: "jump", states: ["point-2d"], predict: ([p]) => [Math.sin(1e4 * p![0]!)] });
    adjustment.addReading({
      kind: jump,
      states: ["P"],
      value: Float64Array.of(50),
      standardDeviations: Float64Array.of(1e-6),
      name: "jump",
    });
    expect(() => adjustment.solve()).toThrowError(/jump/);
    expect(adjustment.value("P")).toEqual(before);
    adjustment.withdraw("jump");
    adjustment.solve();
    for (const k of [0, 1]) expect(adjustment.value("P")[k]).toBeCloseTo(before[k]!, 6);
    expectCovariances(adjustment);
  });

  test("wrong calls are refused at once", () => {
    const { adjustment } = adjustmentOf(quadrilateral, held);
    expect(() => adjustment.addState({ name: "A", kind: "scalar", fixed: false })).toThrowError(/a state "A" already/);
    expect(() => adjustment.addReading(reading(quadrilateral, "distance", ["A", "B"], 1))).toThrowError(
      /Every state of the reading on A, B is fixed/,
    );
    expect(() => adjustment.addReading({ ...reading(quadrilateral, "distance", ["A", "P"], 1), states: ["A", "Z"] })).toThrowError(
      /no state "Z"/,
    );
    expect(() => adjustment.addReading({ ...reading(quadrilateral, "distance", ["A", "P"], 1), kind: "slope-distance" })).toThrowError(
      /cannot join "A" \(point-2d\), "P" \(point-2d\)/,
    );
    adjustment.addReading(reading(quadrilateral, "distance", ["A", "P"], 1, undefined, { name: "d" }));
    expect(() => adjustment.addReading(reading(quadrilateral, "distance", ["A", "Q"], 1, undefined, { name: "d" }))).toThrowError(
      /a reading "d" already/,
    );
    expect(() => adjustment.covariance("P")).toThrowError(/solve first/);
  });
});
