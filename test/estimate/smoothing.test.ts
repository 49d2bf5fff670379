// A chain of linear-Gaussian steps against the published recursions, on small dense matrices of a general library:
// Kalman, "A new approach to linear filtering and prediction problems", J. Basic Eng. 82 (1960); Rauch, Tung, Striebel, "Maximum likelihood
// estimates of linear dynamic systems", AIAA J. 3 (1965).
import { inverse, Matrix } from "ml-matrix";
import { beforeAll, describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { Estimate, type MeasurementInput, type StateId } from "../../src/index.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

/** A level and its rate; the level is read. */
const F = new Matrix([
  [1, 0.5],
  [0, 0.9],
]);
const Q = new Matrix([
  [0.02, 0.01],
  [0.01, 0.05],
]);
const H = new Matrix([[1, 0.2]]);
const R = new Matrix([[0.3]]);
const startMean = Matrix.columnVector([2, -1]);
const startCovariance = new Matrix([
  [1, 0.3],
  [0.3, 2],
]);
const steps = 60;

const r = random(7);
const readings = Array.from({ length: steps }, (_, k) => Math.sin(k / 4) + 0.5 * r.normal());

interface Moment {
  mean: Matrix;
  covariance: Matrix;
}
const forecast = ({ mean, covariance }: Moment): Moment => ({
  mean: F.mmul(mean),
  covariance: F.mmul(covariance).mmul(F.transpose()).add(Q),
});
const innovation = ({ mean, covariance }: Moment, z: number) => ({
  nu: z - H.mmul(mean).get(0, 0),
  s: H.mmul(covariance).mmul(H.transpose()).add(R).get(0, 0),
});
function filtered(before: Moment, z: number): Moment {
  const { nu, s } = innovation(before, z);
  const gain = before.covariance.mmul(H.transpose()).div(s);
  return {
    mean: Matrix.add(before.mean, Matrix.mul(gain, nu)),
    covariance: Matrix.sub(before.covariance, gain.mmul(H).mmul(before.covariance)),
  };
}

/** Every step with the filter's moments before and after its reading. */
const filter: { before: Moment; after: Moment }[] = [];
for (const [k, z] of readings.entries()) {
  const before = k === 0 ? { mean: startMean, covariance: startCovariance } : forecast(filter[k - 1]!.after);
  filter.push({ before, after: filtered(before, z) });
}
const smoother: Moment[] = [];
for (let k = steps - 1; k >= 0; k -= 1) {
  const { after } = filter[k]!;
  if (k === steps - 1) smoother[k] = after;
  else {
    const { before: next } = filter[k + 1]!;
    const gain = after.covariance.mmul(F.transpose()).mmul(inverse(next.covariance));
    const change = Matrix.sub(smoother[k + 1]!.covariance, next.covariance);
    smoother[k] = {
      mean: Matrix.add(after.mean, gain.mmul(Matrix.sub(smoother[k + 1]!.mean, next.mean))),
      covariance: Matrix.add(after.covariance, gain.mmul(change).mmul(gain.transpose())),
    };
  }
}

/** Σ has condition below 1e2 and Λ below 1e4; sixty steps of either recursion, each to a few ε of that. */
const TOLERANCE = 60 * 16 * Number.EPSILON * 1e4;
const near = (found: ArrayLike<number>, expected: Matrix): void => {
  const values = expected.to1DArray();
  expect(found.length).toBe(values.length);
  for (const [k, value] of values.entries()) expect(Math.abs(found[k]! - value)).toBeLessThan(TOLERANCE);
};

/** Step k arrives: its state, tied to the one before, without its reading. */
function arrive(estimate: Estimate, ids: StateId[], k: number): void {
  ids.push(estimate.addState(2));
  const identity = Matrix.eye(2).to2DArray();
  if (k === 0)
    estimate.addMeasurement({
      states: [ids[0]!],
      jacobians: [identity],
      residual: startMean.to1DArray(),
      covariance: startCovariance.to2DArray(),
    });
  else
    estimate.addMeasurement({
      states: [ids[k - 1]!, ids[k]!],
      jacobians: [Matrix.mul(F, -1).to2DArray(), identity],
      residual: [0, 0],
      information: inverse(Q).to2DArray(),
    });
}
const readingOf = (ids: readonly StateId[], k: number): MeasurementInput => ({
  states: [ids[k]!],
  jacobians: [H.to2DArray()],
  residual: [readings[k]!],
  covariance: R.to2DArray(),
});

describe.each(["all", "none"] as const)("a linear-Gaussian chain, track %s", (track) => {
  test("its newest state is the Kalman filter's at every step, candidates give the innovations, and in the end all states are the smoother's", () => {
    const estimate = new Estimate({ track });
    const ids: StateId[] = [];
    for (let k = 0; k < steps; k += 1) {
      arrive(estimate, ids, k);
      estimate.commit();
      const { before, after } = filter[k]!;
      near(estimate.marginal(ids[k]!), before.covariance);
      near(estimate.solution(ids[k]!), before.mean);
      const { nu, s } = innovation(before, readings[k]!);
      const told = estimate.evaluate(readingOf(ids, k));
      near(told.innovation, new Matrix([[nu]]));
      near(told.innovationCovariance, new Matrix([[s]]));
      near([told.mahalanobisSquared], new Matrix([[(nu * nu) / s]]));
      near([told.informationGain], new Matrix([[Math.log(s / R.get(0, 0)) / 2]]));
      estimate.addMeasurement(readingOf(ids, k));
      estimate.commit();
      near(estimate.marginal(ids[k]!), after.covariance);
      near(estimate.solution(ids[k]!), after.mean);
    }
    for (const [k, { mean, covariance }] of smoother.entries()) {
      near(estimate.marginal(ids[k]!), covariance);
      near(estimate.solution(ids[k]!), mean);
    }
    near(estimate.marginals(), new Matrix([smoother.flatMap(({ covariance }) => covariance.to1DArray())]));
    estimate.dispose();
  });

  test("forgetting every state but the newest two keeps the filter going", () => {
    const estimate = new Estimate({ track });
    const ids: StateId[] = [];
    for (let k = 0; k < steps; k += 1) {
      arrive(estimate, ids, k);
      estimate.addMeasurement(readingOf(ids, k));
      if (k > 1) estimate.forget([ids[k - 2]!]);
      expect(estimate.commit().states).toBe(Math.min(k + 1, 2));
      near(estimate.marginal(ids[k]!), filter[k]!.after.covariance);
      near(estimate.solution(ids[k]!), filter[k]!.after.mean);
    }
    estimate.dispose();
  });
});
