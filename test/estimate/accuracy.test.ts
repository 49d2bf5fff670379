// What cancellation and bad conditioning cost: jumps of information, and long chains on one prior.
import { beforeAll, describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { patrol } from "../../bench/families/patrol.js";
import type { Stream } from "../../bench/families/stream.js";
import { Estimate, type MeasurementInput, type StateId } from "../../src/index.js";
import { EnvelopeCholesky } from "../support/envelope.js";
import { ExactSums } from "../support/exact-twin.js";
import { initFacade } from "../support/facade.js";
import { Refined } from "../support/refined.js";

beforeAll(initFacade);

const identity = [
  [1, 0, 0],
  [0, 1, 0],
  [0, 0, 1],
];
const fix = (state: StateId, deviation: number): MeasurementInput => ({
  states: [state],
  jacobians: [identity],
  residual: [0, 0, 0],
  standardDeviations: [deviation, deviation, deviation],
});

/** The stream's measurements, the first one (a prior on pose 0) replaced. */
function measurementsOf(stream: Stream, prior: MeasurementInput): MeasurementInput[] {
  return Array.from({ length: stream.measurements }, (_, k) => (k === 0 ? prior : stream.measurement(k)));
}

/** Adds the stream step by step, all states of dimension 3 and known by their number. */
function feed(estimate: Estimate, stream: Stream, measurements: readonly MeasurementInput[], after: (step: number) => void): void {
  for (let s = 0; s < stream.steps; s += 1) {
    const { firstState, lastState, firstMeasurement, lastMeasurement } = stream.step(s);
    for (let i = firstState; i < lastState; i += 1) estimate.addState(3);
    for (let k = firstMeasurement; k < lastMeasurement; k += 1) estimate.addMeasurement(measurements[k]!);
    estimate.commit();
    after(s);
  }
}

const sumsOf = (states: number, measurements: readonly MeasurementInput[]): ExactSums => {
  const sums = new ExactSums(3 * states);
  for (const m of measurements)
    sums.measure(
      m,
      (state) => 3 * state,
      () => 3,
    );
  return sums;
};

/** ‖found − expected‖ ÷ ‖expected‖ of one block, its unknowns scaled to unit variance: metres and radians alike. */
function blockError(found: Float64Array, expected: Float64Array): number {
  const d = Math.sqrt(expected.length);
  let worst = 0;
  for (let i = 0; i < d; i += 1)
    for (let j = 0; j < d; j += 1)
      worst = Math.max(
        worst,
        Math.abs(found[i * d + j]! - expected[i * d + j]!) / Math.sqrt(expected[i * (d + 1)]! * expected[j * (d + 1)]!),
      );
  return worst;
}

describe("a jump of information", () => {
  test.each([1e-2, 1e-8])(
    "a patrol of 1 000 poses held by a prior of information %s, then a fix of 0.01: every kept marginal is right to 1e-9",
    (information) => {
      const poses = 1000;
      const stream = patrol(poses, { side: 8, revisits: 0.28 });
      const measurements = measurementsOf(stream, fix(0, 1 / Math.sqrt(information)));
      const estimate = new Estimate({ track: "all", onDoubt: "answer" });
      feed(estimate, stream, measurements, (s) => {
        if (s % 50 === 0) estimate.marginals();
      });
      estimate.marginals();
      const jump = fix(500, 0.01);
      estimate.addMeasurement(jump);
      const report = estimate.commit();
      const blocks = estimate.marginals();
      expect(estimate.health().bound).toBeLessThan(1e-6);
      if (information < 1e-6) expect(report.because).toContain("times stronger");

      const refined = new Refined(sumsOf(poses, [...measurements, jump]));
      for (const state of [0, 307, 614, 921]) {
        expect(blockError(blocks.subarray(9 * state, 9 * state + 9), refined.block(3 * state, 3))).toBeLessThan(1e-9);
      }
      refined.dispose();
      // The others against a second estimate that never saw the jump: everything at once.
      const fresh = new Estimate({ onDoubt: "answer" });
      for (let s = 0; s < poses; s += 1) fresh.addState(3);
      for (const m of [...measurements, jump]) fresh.addMeasurement(m);
      fresh.commit();
      const all = fresh.marginals();
      for (let state = 0; state < poses; state += 1)
        expect(blockError(blocks.subarray(9 * state, 9 * state + 9), all.subarray(9 * state, 9 * state + 9))).toBeLessThan(1e-9);
      estimate.dispose();
      fresh.dispose();
    },
  );
});

describe("a chain of 10 000 poses on one prior", () => {
  const poses = 10_000;
  const stream = chain(poses, { fixEvery: 0 });
  const measurements = measurementsOf(stream, stream.measurement(0));
  let variances: Float64Array | undefined;
  const exactVariances = (): Float64Array => {
    variances ??= new EnvelopeCholesky(sumsOf(poses, measurements).columns()).inverseDiagonal();
    return variances;
  };

  const expectRight = (estimate: Estimate): void => {
    const blocks = estimate.marginals();
    for (const [unknown, variance] of exactVariances().entries()) {
      const found = blocks[9 * Math.floor(unknown / 3) + 4 * (unknown % 3)]!;
      expect(Math.abs(found / variance - 1)).toBeLessThan(1e-9);
    }
    const { bound, condition } = estimate.health();
    expect(bound).toBeLessThan(1e-6);
    expect(condition).toBeGreaterThan(1e12);
  };

  test.each(["all", "none"] as const)(
    "marginals from leaves agree with double-double to 1e-9, and no worse base takes their place, track %s",
    (track) => {
      const estimate = new Estimate({ track, route: "information" });
      feed(estimate, stream, measurements, () => {});
      expectRight(estimate);
      expect(estimate.health()).toMatchObject({ baseRoute: "information", refusal: expect.stringContaining("would be good to") });
      estimate.dispose();
    },
  );

  test.each(["all", "none"] as const)(
    "a new base that an information matrix would not bear is made from the rows, none is refused, and marginals agree to 1e-9, track %s",
    (track) => {
      const estimate = new Estimate({ track });
      feed(estimate, stream, measurements, () => {});
      expectRight(estimate);
      expect(estimate.health()).toMatchObject({ baseRoute: "orthogonal", refusal: undefined });
      expect(estimate.health().leaves).toBeLessThan(poses / 2);
      estimate.dispose();
    },
  );
});
