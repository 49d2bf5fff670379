import { beforeAll, expect, test } from "vitest";
import {
  Estimate,
  memoryUsage,
  NotCommittedError,
  UndeterminedError,
  UnknownMeasurementError,
  UnknownStateError,
} from "../../src/index.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

/** Two heights in a row above a fixed one: variances 0.04, 0.05, 0.06 by the law of propagation. */
function levelling() {
  const estimate = new Estimate({ track: "all" });
  const [a, b, c] = ["A", "B", "C"].map((name) => estimate.addState(1, { name })) as [number, number, number];
  const step = (from: number, to: number, residual: number) =>
    estimate.addMeasurement({ states: [from, to], jacobians: [[[-1]], [[1]]], residual: [residual], standardDeviations: [0.1] });
  const fix = estimate.addMeasurement({ states: [a], jacobians: [[[1]]], residual: [0.5], standardDeviations: [0.2] });
  const steps = [step(a, b, 1), step(b, c, 2)];
  estimate.commit();
  return { estimate, a, b, c, fix, steps, step };
}

test("a refused withdrawal leaves every answer as it was, stays pending, and can be called off", () => {
  const { estimate, fix } = levelling();
  const before = estimate.marginals();
  expect(before[0]).toBeCloseTo(0.04, 14);
  expect(before[2]).toBeCloseTo(0.06, 14);
  estimate.withdraw(fix);
  expect(() => estimate.withdraw(fix)).toThrow(UnknownMeasurementError);
  expect(() => estimate.commit()).toThrow(UndeterminedError);
  expect(estimate.marginals()).toEqual(before);
  expect(() => estimate.commit()).toThrow(UndeterminedError);
  estimate.discard();
  expect(estimate.commit().route).toBe("none");
  estimate.withdraw(fix);
  estimate.discard();
  expect(estimate.marginals()).toEqual(before);
  estimate.dispose();
});

test("a wider state in the place of one that was refused, with rows in the ledger, has room of its own", () => {
  const used = memoryUsage().used;
  const { estimate, c, fix, step } = levelling();
  const d = estimate.addState(1);
  for (let k = 0; k < 20; k += 1) step(c, d, 1); // one defines the new state, the others are entered in the ledger
  estimate.withdraw(fix);
  expect(() => estimate.commit()).toThrow(UndeterminedError);
  estimate.discard();

  const width = 16;
  const e = estimate.addState(width);
  const unit = (sign: number) => Array.from({ length: width }, (_, i) => Array.from({ length: width }, (__, j) => (i === j ? sign : 0)));
  const column = Array.from({ length: width }, () => [-1]);
  for (let k = 0; k < 2; k += 1)
    estimate.addMeasurement({
      states: [c, e],
      jacobians: [column, unit(1)],
      residual: new Float64Array(width),
      standardDeviations: new Float64Array(width).fill(0.1),
    });
  estimate.commit();
  // c has variance 0.06; each of the sixteen is tied to it twice, 0.01 ÷ 2.
  for (const [k, value] of estimate.marginal(e).entries()) expect(value).toBeCloseTo(k % (width + 1) === 0 ? 0.065 : 0.06, 13);
  expect(estimate.marginal(c)[0]).toBeCloseTo(0.06, 14);
  estimate.dispose();
  expect(memoryUsage().used).toBe(used);
});

test("discarded states and measurements are gone, and what was committed goes on", () => {
  const { estimate, c, step } = levelling();
  const d = estimate.addState(1);
  const loose = step(c, d, 1);
  expect(() => estimate.marginal(d)).toThrow(NotCommittedError);
  estimate.discard();
  expect(() => step(c, d, 1)).toThrow(UnknownStateError);
  expect(() => estimate.withdraw(loose)).toThrow(UnknownMeasurementError);
  const e = estimate.addState(1);
  step(c, e, 3);
  estimate.commit();
  expect(estimate.marginal(e)[0]).toBeCloseTo(0.07, 14);
  estimate.dispose();
});

test("forgetting the middle keeps what the ends know of each other, and the variance factor's degrees of freedom", () => {
  const { estimate, a, b, c, steps, step } = levelling();
  step(a, c, 3.3);
  estimate.commit();
  const before = { joint: estimate.jointMarginal([a, c]), factor: estimate.varianceFactor(), x: estimate.solution(c) };
  estimate.forget([b]);
  estimate.commit();
  expect(() => estimate.marginal(b)).toThrow(UnknownStateError);
  expect(() => estimate.withdraw(steps[0]!)).toThrow(UnknownMeasurementError);
  for (const [k, v] of estimate.jointMarginal([a, c]).entries()) expect(v).toBeCloseTo(before.joint[k]!, 14);
  expect(estimate.solution(c)[0]).toBeCloseTo(before.x[0]!, 12);
  expect(estimate.varianceFactor().degreesOfFreedom).toBe(before.factor.degreesOfFreedom);
  expect(estimate.varianceFactor().weightedSquares).toBeCloseTo(before.factor.weightedSquares, 10);
  expect(estimate.marginals()).toHaveLength(2);
  estimate.dispose();
});

test("a candidate's innovation, distance and gain are those of adding it, for one and for many at once", () => {
  const { estimate, a, b, c } = levelling();
  const candidate = (to: number) => ({ states: [a, to], jacobians: [[[-1]], [[1]]], residual: [2.5], standardDeviations: [0.3] });
  const many = estimate.evaluate([candidate(b), candidate(c)]);
  expect(many[1]).toEqual(estimate.evaluate(candidate(c)));
  // c − a is two steps of variance 0.01: S = 0.02 + 0.09; its estimate is 3.
  expect(many[1]!.innovationCovariance[0]).toBeCloseTo(0.11, 14);
  expect(many[1]!.innovation[0]).toBeCloseTo(-0.5, 12);
  expect(many[1]!.mahalanobisSquared).toBeCloseTo(0.25 / 0.11, 12);
  expect(many[1]!.informationGain).toBeCloseTo(0.5 * Math.log(0.11 / 0.09), 12);
  const before = estimate.logDeterminant();
  estimate.addMeasurement(candidate(c));
  estimate.commit();
  expect(estimate.logDeterminant() - before).toBeCloseTo(2 * many[1]!.informationGain, 12);
  expect(estimate.relativeCovariance(a, c, [[-1]], [[1]])[0]).toBeCloseTo(1 / (1 / 0.02 + 1 / 0.09), 14);
  estimate.dispose();
});
