import { beforeAll, describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import {
  CommitUnderWayError,
  DisposedError,
  Estimate,
  type MeasurementInput,
  memoryUsage,
  type StateId,
  setMemoryLimit,
} from "../../src/index.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

const identity = [
  [1, 0, 0],
  [0, 1, 0],
  [0, 0, 1],
];

/** Twelve poses in a chain, two of them fixed, with something pending on top: a state and two measurements. */
function underWay(track: "all" | "none") {
  const stream = chain(12, { fixEvery: 6 });
  const estimate = new Estimate({ track });
  const ids: StateId[] = [];
  const measurements: number[] = [];
  for (let s = 0; s < stream.steps; s += 1) {
    const { firstMeasurement, lastMeasurement } = stream.step(s);
    ids.push(estimate.addState(3, { name: `pose ${s}` }));
    for (let k = firstMeasurement; k < lastMeasurement; k += 1) {
      const { states, ...rest } = stream.measurement(k);
      measurements.push(estimate.addMeasurement({ states: states.map((i) => ids[i]!), ...rest }));
    }
    estimate.commit();
  }
  estimate.forget([ids[3]!]);
  estimate.withdraw(measurements.at(-1)!);
  const check = estimate.addMeasurement({ states: [ids[11]!], jacobians: [identity], residual: [0, 0, 0], standardDeviations: [1, 1, 1] });
  estimate.commit();
  return { estimate, ids, measurements, check };
}

/** All answers that can be asked for, as bits. */
function answers(estimate: Estimate, ids: readonly StateId[]) {
  const [a, b] = [ids[0]!, ids[11]!];
  const marginals = estimate.marginals(); // first: reading may bring in a new base
  const { ledgerBytes, ...sizes } = estimate.statistics; // room may have grown, and stays
  return {
    marginals,
    solution: estimate.solution(),
    cross: estimate.crossCovariance(a, b),
    joint: estimate.jointMarginal([b, ids[5]!]),
    column: estimate.blockColumn(b),
    residuals: estimate.residuals(),
    factor: estimate.varianceFactor(),
    logDeterminant: estimate.logDeterminant(),
    sizes,
  };
}

const fix = (state: StateId): MeasurementInput => ({
  states: [state],
  jacobians: [identity],
  residual: [0, 0, 0],
  standardDeviations: [1, 1, 1],
});

type World = ReturnType<typeof underWay>;
const refusals: [string, string, (w: World) => unknown][] = [
  [
    "MEASUREMENT_SHAPE",
    "a Jacobian of the wrong shape",
    ({ estimate, ids }) => estimate.addMeasurement({ ...fix(ids[0]!), jacobians: [[[1, 0]]] }),
  ],
  [
    "NOISE_NOT_SYMMETRIC",
    "a covariance that is not symmetric",
    ({ estimate, ids }) => {
      const { standardDeviations, ...rest } = fix(ids[0]!);
      return estimate.addMeasurement({
        ...rest,
        covariance: [
          [1, 0.5, 0],
          [0.1, 1, 0],
          [0, 0, 1],
        ],
      });
    },
  ],
  [
    "NOISE_NOT_POSITIVE_DEFINITE",
    "a covariance that is not positive definite",
    ({ estimate, ids }) => {
      const { standardDeviations, ...rest } = fix(ids[0]!);
      return estimate.addMeasurement({
        ...rest,
        covariance: [
          [1, 2, 0],
          [2, 1, 0],
          [0, 0, 1],
        ],
      });
    },
  ],
  ["UNKNOWN_STATE", "a measurement on an unknown state", ({ estimate }) => estimate.addMeasurement(fix(99))],
  ["UNKNOWN_STATE", "a measurement on a forgotten state", ({ estimate, ids }) => estimate.addMeasurement(fix(ids[3]!))],
  ["MEASUREMENT_NOT_FINITE", "NaN", ({ estimate, ids }) => estimate.addMeasurement({ ...fix(ids[0]!), residual: [0, Number.NaN, 0] })],
  ["UNKNOWN_MEASUREMENT", "withdrawing twice", ({ estimate, measurements }) => estimate.withdraw(measurements.at(-1)!)],
  ["UNKNOWN_MEASUREMENT", "withdrawing what never was", ({ estimate }) => estimate.withdraw(999)],
  [
    "UNKNOWN_MEASUREMENT",
    "withdrawing what a forgotten state has taken along",
    ({ estimate, measurements }) => estimate.withdraw(measurements[3]!),
  ],
  [
    "UNKNOWN_MEASUREMENT",
    "replacing what was withdrawn",
    ({ estimate, measurements }) => estimate.replace(measurements.at(-1)!, { jacobians: [identity], residual: [0, 0, 0] }),
  ],
  [
    "MEASUREMENT_SHAPE",
    "replacing by other rows than there were",
    ({ estimate, check }) => estimate.replace(check, { jacobians: [[[1, 0, 0]]], residual: [0] }),
  ],
  ["UNKNOWN_STATE", "forgetting twice", ({ estimate, ids }) => estimate.forget([ids[0]!, ids[3]!])],
  ["UNKNOWN_STATE", "a marginal of a forgotten state", ({ estimate, ids }) => estimate.marginal(ids[3]!)],
  ["UNKNOWN_STATE", "a joint marginal with an unknown state", ({ estimate, ids }) => estimate.jointMarginal([ids[0]!, 99])],
  ["UNKNOWN_STATE", "a candidate with a state that does not exist", ({ estimate, ids }) => estimate.evaluate([fix(ids[0]!), fix(99)])],
  [
    "NOISE_FORM",
    "a candidate without noise",
    ({ estimate, ids }) => estimate.evaluate({ states: [ids[0]!], jacobians: [identity], residual: [0, 0, 0] }),
  ],
  ["INDEX_RANGE", "a state of no dimension", ({ estimate }) => estimate.addState(0)],
  ["OPTION", "an option that does not exist", ({ estimate }) => estimate.addState(1, { nmae: "x" } as object)],
];

describe.each(["all", "none"] as const)("what is refused leaves the estimate as it was, track %s", (track) => {
  test("every call with bad input", () => {
    const world = underWay(track);
    const before = answers(world.estimate, world.ids);
    for (const [code, what, call] of refusals) {
      let thrown: unknown;
      try {
        call(world);
      } catch (error) {
        thrown = error;
      }
      expect(thrown, what).toMatchObject({ code });
      expect(answers(world.estimate, world.ids), what).toEqual(before);
      expect(world.estimate.commit().route, what).toBe("none"); // nothing is pending
    }
    world.estimate.dispose();
  });

  test("a state not committed yet cannot be asked for, and counts after the commit", () => {
    const { estimate, ids } = underWay(track);
    const before = answers(estimate, ids);
    const id = estimate.addState(3);
    estimate.addMeasurement(fix(id));
    for (const ask of [() => estimate.marginal(id), () => estimate.evaluate(fix(id)), () => estimate.crossCovariance(ids[0]!, id)])
      expect(ask).toThrow(expect.objectContaining({ code: "NOT_COMMITTED", details: { state: id } }));
    expect(answers(estimate, ids)).toEqual(before);
    estimate.commit();
    // Unit noise on unit Jacobians.
    for (const [k, value] of estimate.marginal(id).entries())
      expect(Math.abs(value - (k % 4 === 0 ? 1 : 0))).toBeLessThan(4 * Number.EPSILON);
    estimate.dispose();
  });

  test("a withdrawal that leaves states undetermined is refused by name; with a tie in its place the same commit goes through", () => {
    const { estimate, ids, check } = underWay(track);
    // The last step's odometry is out: its pose hangs on the check alone.
    const before = answers(estimate, ids);
    estimate.withdraw(check);
    const thrown = errorOfCommit(estimate);
    expect(thrown).toMatchObject({ code: "UNDETERMINED", states: [ids[11]], names: ["pose 11"] });
    expect(thrown.message).toContain("pose 11");
    expect(answers(estimate, ids)).toEqual(before);
    estimate.addMeasurement(fix(ids[11]!));
    expect(estimate.commit().route).not.toBe("none");
    // The same fix as the check that went.
    const after = answers(estimate, ids);
    for (const [k, value] of before.marginals.entries())
      expect(Math.abs(after.marginals[k]! - value)).toBeLessThan(1e-9 * (1 + Math.abs(value)));
    estimate.dispose();
  });

  test("out of memory: the commit is refused, what was pending is still pending and goes through when there is room", () => {
    const { limit } = memoryUsage();
    const { estimate, ids } = underWay(track);
    const before = answers(estimate, ids);
    // 70 states at once: more than arrive as leaves, so a new base is needed.
    const many = Array.from({ length: 70 }, () => estimate.addState(16));
    const identity16 = Array.from({ length: 16 }, (_, i) => Array.from({ length: 16 }, (__, j) => (i === j ? 1 : 0)));
    for (const state of many)
      estimate.addMeasurement({
        states: [state],
        jacobians: [identity16],
        residual: new Float64Array(16),
        standardDeviations: new Float64Array(16).fill(1),
      });
    setMemoryLimit(memoryUsage().used + 40_000);
    try {
      expect(errorOfCommit(estimate)).toMatchObject({ code: "MEMORY_LIMIT" });
    } finally {
      setMemoryLimit(limit);
    }
    expect(answers(estimate, ids)).toEqual(before);
    expect(estimate.commit().states).toBe(11 + 70);
    expect(Array.from(estimate.marginal(many[69]!))).toEqual(identity16.flat());
    estimate.dispose();
  });

  test("a commit inside a commit, and every other call while one is under way in slices, is refused", async () => {
    const stream = chain(4000, { fixEvery: 10 });
    const estimate = new Estimate({ track });
    const ids = Array.from({ length: stream.states }, () => estimate.addState(3));
    for (let k = 0; k < stream.measurements; k += 1) {
      const { states, ...rest } = stream.measurement(k);
      estimate.addMeasurement({ states: states.map((i) => ids[i]!), ...rest });
    }
    let calls = 0;
    const report = await estimate.commitAsync({
      onProgress: () => {
        for (const call of [() => estimate.commit(), () => estimate.withdraw(0), () => estimate.addState(1), () => estimate.solution()])
          expect(call).toThrow(CommitUnderWayError);
        calls += 1;
      },
    });
    expect(calls).toBeGreaterThan(0);
    expect(report.states).toBe(4000);
    expect(estimate.marginal(ids[3999]!).every(Number.isFinite)).toBe(true);
    estimate.dispose();
  });

  test("after dispose every call says so, and nothing is held any more", () => {
    const { used } = memoryUsage();
    const { estimate, ids } = underWay(track);
    estimate.dispose();
    estimate.dispose();
    expect(memoryUsage().used).toBe(used);
    for (const call of [() => estimate.marginal(ids[0]!), () => estimate.addState(1), () => estimate.commit(), () => estimate.statistics])
      expect(call).toThrow(DisposedError);
  });
});

function errorOfCommit(estimate: Estimate): Error {
  try {
    estimate.commit();
  } catch (error) {
    return error as Error;
  }
  throw new Error("the commit went through");
}
