// Bases by either route from rows to a factor: which is taken and told, how exact it is, and that nothing else changes.
import { beforeAll, describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { patrol } from "../../bench/families/patrol.js";
import type { Stream } from "../../bench/families/stream.js";
import { families } from "../../bench/families.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { runSteps } from "../../bindings/slices.js";
import { type Base, baseSteps, isSingular } from "../../src/estimate/base.js";
import { assemblySteps } from "../../src/estimate/information.js";
import { whiten } from "../../src/estimate/rows.js";
import {
  Estimate,
  type EstimateOptions,
  type MeasurementInput,
  memoryUsage,
  OptionError,
  type StateId,
  UndeterminedError,
} from "../../src/index.js";
import { random } from "../../src/support/random.js";
import { EnvelopeCholesky } from "../support/envelope.js";
import { ExactAnswers, ExactSums } from "../support/exact-twin.js";
import { errorOf, initFacade } from "../support/facade.js";
import { refusedUntilThereIsRoom } from "../support/refused.js";

beforeAll(initFacade);

const routes = ["automatic", "information", "orthogonal"] as const;

/** All of a stream in an estimate, pending: its states' ids are its numbers. */
function pending(stream: Stream, options: EstimateOptions = {}, skip: (k: number) => boolean = () => false): Estimate {
  const estimate = new Estimate(options);
  for (let i = 0; i < stream.states; i += 1) estimate.addState(stream.dimension(i));
  for (let k = 0; k < stream.measurements; k += 1) if (!skip(k)) estimate.addMeasurement(stream.measurement(k));
  return estimate;
}

const row = (states: StateId[], coefficients: number[], deviation: number, residual = 0): MeasurementInput => ({
  states,
  jacobians: coefficients.map((value) => [[value]]),
  residual: [residual],
  standardDeviations: [deviation],
});

/** Heights in a line, the first known to `first`, each tied to the one before to `tie`. */
function heights(count: number, first: number, tie: number, options: EstimateOptions = {}) {
  const estimate = new Estimate(options);
  const states = Array.from({ length: count }, () => estimate.addState(1));
  const measurements = states.map((state, k) =>
    k === 0 ? row([state], [1], first, 3) : row([states[k - 1]!, state], [-1, 1], tie, 0.1 * k),
  );
  const ids = measurements.map((m) => estimate.addMeasurement(m));
  return { estimate, states, measurements, ids };
}

describe("the route of a base is told, with its reason", () => {
  test("as asked for, or as the condition asks for", () => {
    const told = (stream: Stream, route: EstimateOptions["route"]): string => {
      const estimate = pending(stream, { route, onDoubt: "answer" });
      const report = estimate.commit();
      expect(report.route).toBe("rebase");
      const { baseRoute, baseBecause } = estimate.health({ samples: 0 });
      expect(report.because).toBe(`the first commit; ${baseBecause}`);
      expect(baseBecause.startsWith(`${baseRoute} route, `)).toBe(true);
      estimate.dispose();
      return baseBecause;
    };
    const long = chain(1000, { fixEvery: 0 });
    expect(told(long, "information")).toBe("information route, as asked for");
    expect(told(long, "orthogonal")).toBe("orthogonal route, as asked for");
    expect(told(long, "automatic")).toMatch(/^orthogonal route, since JᵀWJ scaled to unit diagonal has a condition of about \d\.\de\+9$/);
    for (const family of ["net", "heavy", "helix", "landmarks", "grid"] as const)
      expect(told(families[family].make(200), "automatic")).toMatch(/^information route, since JᵀWJ scaled/);
  });

  test("when Cholesky fails where the rows do determine every state: the base is made from them, and is right", async () => {
    const { estimate, states, measurements } = heights(60, 1e3, 1e-8, { onDoubt: "answer" });
    expect(estimate.commit().because).toContain("orthogonal route, since JᵀWJ is not safely positive definite in f64");
    const exact = new ExactAnswers(
      states.map((id) => [id, 1] as const),
      measurements,
    );
    const { bound } = estimate.health();
    expect(bound).toBeLessThan(1e-2);
    const solution = estimate.solution();
    for (const state of states) {
      const variance = exact.block(state, state)[0]!;
      expect(Math.abs(solution[state]! - exact.solution(state)[0]!)).toBeLessThan(1e-10 * Math.sqrt(variance));
      expect(Math.abs(estimate.marginal(state)[0]! / variance - 1)).toBeLessThanOrEqual(bound);
    }
    estimate.dispose();

    const byInformation = heights(60, 1e3, 1e-8, { route: "information" }).estimate;
    expect(await errorOf(() => byInformation.commit())).toBeInstanceOf(UndeterminedError);
    byInformation.dispose();
  });

  test("another word is refused", async () => {
    for (const make of [
      () => new Estimate({ route: "shortest" as "automatic" }),
      () => Estimate.restore(pending(chain(3)).snapshot(), { route: "shortest" as "automatic" }),
    ]) {
      const error = await errorOf(make);
      expect(error).toBeInstanceOf(OptionError);
      expect((error as OptionError).message).toContain('"automatic"');
    }
  });

  test("columns beyond what reflections bear go through the information matrix", () => {
    const { estimate, states } = heights(3, 1e-145, 1e-145, { route: "orthogonal" });
    expect(estimate.commit().because).toContain("information route, since squared columns of the rows pass what reflections bear");
    expect(Math.abs(estimate.marginal(states[2]!)[0]! / 3e-290 - 1)).toBeLessThan(1e-12);
    estimate.dispose();
  });
});

test("rows and blocks of zeros, states read in any order and by matrices of noise: both routes agree on marginals and solution", () => {
  const answers = (["information", "orthogonal"] as const).map((route) => {
    const r = random(5);
    const estimate = new Estimate({ route });
    const states = Array.from({ length: 30 }, (_, k) => [estimate.addState(1 + (k % 4)), 1 + (k % 4)] as const);
    for (const [id, d] of states) {
      const [other, e] = states[r.below(30)]!;
      const jacobians = [d, e].map((n) =>
        Float64Array.from({ length: (d + 1) * n }, (_, k) => (k < n || r.uniform() < 0.2 ? 0 : r.normal())),
      );
      const covariance = Array.from({ length: d + 1 }, (_, i) => Array.from({ length: d + 1 }, (__, j) => (i === j ? 2 : 0.5)));
      const residual = Array.from({ length: d + 1 }, () => r.normal());
      estimate.addMeasurement({ states: [other, id], jacobians: [jacobians[1]!, jacobians[0]!], residual, covariance });
      const identity = Array.from({ length: d }, (_, i) => Array.from({ length: d }, (__, j) => (i === j ? 1 : 0)));
      const weak = { residual: residual.slice(1), standardDeviations: new Float64Array(d).fill(3) };
      estimate.addMeasurement({ states: [id], jacobians: [identity], ...weak });
      const nothing = { residual: [7], standardDeviations: [1] };
      estimate.addMeasurement({ states: [id], jacobians: [[new Float64Array(d)]], ...nothing });
    }
    expect(estimate.commit().because).toContain(`${route} route, as asked for`);
    const found = [...estimate.marginals(), ...estimate.solution(), estimate.varianceFactor().weightedSquares, estimate.logDeterminant()];
    estimate.dispose();
    return found;
  });
  for (const [k, value] of answers[0]!.entries()) expect(Math.abs(answers[1]![k]! - value)).toBeLessThan(1e-11 * (1 + Math.abs(value)));
});

describe.each([1000, 10_000])("a chain of %i poses on one prior, all in one commit", (poses) => {
  const stream = chain(poses, { fixEvery: 0 });
  let variances: Float64Array | undefined;
  const exact = (): Float64Array => {
    if (variances) return variances;
    const sums = new ExactSums(3 * poses);
    for (let k = 0; k < stream.measurements; k += 1)
      sums.measure(
        stream.measurement(k),
        (state) => 3 * state,
        () => 3,
      );
    variances = new EnvelopeCholesky(sums.columns()).inverseDiagonal();
    return variances;
  };
  const worst = (blocks: Float64Array): number =>
    exact().reduce((most, variance, u) => Math.max(most, Math.abs(blocks[9 * Math.floor(u / 3) + 4 * (u % 3)]! / variance - 1)), 0);

  test.each([
    ["automatic", "all"],
    ["automatic", "none"],
    ["orthogonal", "all"],
  ] as const)("by the %s route, track %s: marginals agree with double-double to 1e-9", (route, track) => {
    const estimate = pending(stream, { route, track });
    expect(estimate.commit().because).toContain("orthogonal route");
    const error = worst(estimate.marginals());
    expect(error).toBeLessThan(1e-9);
    expect(error).toBeLessThanOrEqual(estimate.health().bound);
    expect(estimate.health().bound).toBeLessThan(1e-7);
    estimate.dispose();
  });

  test("an information matrix loses digits there, and the bound says so", () => {
    const estimate = pending(stream, { route: "information", onDoubt: "answer" });
    const { bound } = estimate.commit();
    const error = worst(estimate.marginals());
    expect(error).toBeGreaterThan(1e-9);
    expect(error).toBeLessThanOrEqual(bound);
    estimate.dispose();
  });
});

describe.each(routes)("what rows leave undetermined, by the %s route", (route) => {
  const statesOf = async (estimate: Estimate): Promise<readonly number[]> => {
    const error = (await errorOf(() => estimate.commit())) as UndeterminedError;
    expect(error).toBeInstanceOf(UndeterminedError);
    return error.details.states as number[];
  };

  test("is named, and nothing has changed: no prior, a state that nothing reads, a cut chain", async () => {
    const used = memoryUsage().used;
    const all = (n: number): number[] => Array.from({ length: n }, (_, k) => k);
    const cut = chain(60, { fixEvery: 0 });
    for (const [stream, isGone, expected] of [
      [chain(300, { fixEvery: 0 }), (k: number) => k === 0, all(300)],
      [patrol(80, { side: 8, revisits: 0.28 }), (k: number) => k === 0, all(80)],
      [cut, (k: number) => cut.measurement(k).states.join() === "39,40", all(60).slice(40)],
    ] as const) {
      const estimate = pending(stream, { route }, isGone);
      expect(await statesOf(estimate)).toEqual(expected);
      for (let k = 0; k < stream.measurements; k += 1) if (isGone(k)) estimate.addMeasurement(stream.measurement(k));
      expect(estimate.commit().states).toBe(stream.states);
      estimate.dispose();
    }
    const alone = pending(chain(5), { route });
    const unread = alone.addState(2);
    expect(await statesOf(alone)).toEqual([unread]);
    alone.dispose();
    expect(memoryUsage().used).toBe(used);
  });

  test("is refused in random networks of differences with weights 8 orders of magnitude apart, and one height more holds them", async () => {
    for (let seed = 0; seed < 60; seed += 1) {
      const r = random(seed);
      const estimate = new Estimate({ route, onDoubt: "answer" });
      const states = Array.from({ length: 3 + r.below(20) }, () => estimate.addState(1));
      for (let k = 1; k < states.length; k += 1)
        estimate.addMeasurement(row([states[r.below(k)]!, states[k]!], [-1, 1], 10 ** (4 * r.uniform() - 2)));
      for (let k = 0; k < states.length; k += 1) {
        const [a, b] = [r.below(states.length), r.below(states.length)];
        if (a !== b) estimate.addMeasurement(row([states[a]!, states[b]!], [-1, 1], 10 ** (4 * r.uniform() - 2)));
      }
      expect(await statesOf(estimate)).toEqual(states);
      estimate.addMeasurement(row([states[r.below(states.length)]!], [1], 1));
      expect(estimate.commit().states).toBe(states.length);
      estimate.dispose();
    }
  });

  test("by a withdrawal is refused too", async () => {
    const { estimate, states, ids } = heights(30, 1, 1e-3, { route });
    estimate.commit();
    const before = estimate.marginals();
    estimate.withdraw(ids[0]!);
    expect(await statesOf(estimate)).toEqual(states);
    expect(estimate.marginals()).toEqual(before);
    estimate.dispose();
  });
});

test("a withdrawal that leaves states held by 1e-10 of what it takes away goes through by rows, and the marginals that are left are right", async () => {
  const weak = row([0], [1], 1e7);
  const make = (route: EstimateOptions["route"]) => {
    const { estimate, states, measurements, ids } = heights(20, 1e-3, 1e-3, { route, onDoubt: "answer" });
    estimate.addMeasurement(weak);
    estimate.commit();
    estimate.withdraw(ids[0]!);
    return { estimate, states, left: [weak, ...measurements.slice(1)] };
  };
  const { estimate, states, left } = make("automatic");
  expect(estimate.commit().because).toContain("orthogonal route");
  const exact = new ExactAnswers(
    states.map((id) => [id, 1] as const),
    left,
  );
  const { bound } = estimate.health();
  for (const state of states) expect(Math.abs(estimate.marginal(state)[0]! / exact.block(state, state)[0]! - 1)).toBeLessThanOrEqual(bound);
  expect(bound).toBeLessThan(1e-3);
  estimate.dispose();
  const other = make("information").estimate;
  expect(await errorOf(() => other.commit())).toBeInstanceOf(UndeterminedError);
  other.dispose();
});

describe("a base by the orthogonal route", () => {
  const stream = chain(2000, { fixEvery: 0 });
  const atOnce = (track: "all" | "none") => {
    const estimate = pending(stream, { track });
    estimate.commit();
    const answers = [estimate.marginals(), estimate.solution()];
    estimate.dispose();
    return answers;
  };

  test.each(["all", "none"] as const)("in slices has the same bits, and its progress never falls, track %s", async (track) => {
    const estimate = pending(stream, { track });
    let told = 0;
    const report = await estimate.commitAsync({
      onProgress: (fraction) => {
        expect(fraction).toBeGreaterThanOrEqual(told);
        told = fraction;
      },
    });
    expect(told).toBe(1);
    expect(report.because).toContain("orthogonal route, since");
    expect([estimate.marginals(), estimate.solution()]).toEqual(atOnce(track));
    estimate.dispose();
  });

  test("is built in slices within a latency budget, while the old one answers", () => {
    const estimate = new Estimate({ track: "all", latencyBudget: 0.2, route: "orthogonal" });
    const twin = new Estimate({ route: "orthogonal" });
    const net = families.net.make(800);
    let [under, adopted] = [0, 0];
    for (let s = 0; s < net.steps; s += 1) {
      const { firstState, lastState, firstMeasurement, lastMeasurement } = net.step(s);
      for (const each of [estimate, twin]) {
        for (let i = firstState; i < lastState; i += 1) each.addState(net.dimension(i));
        for (let k = firstMeasurement; k < lastMeasurement; k += 1) each.addMeasurement(net.measurement(k));
      }
      const { because } = estimate.commit();
      twin.commit();
      if (because.includes("is being built")) under += 1;
      if (because.includes("built in slices; orthogonal route, as asked for")) adopted += 1;
    }
    expect(under).toBeGreaterThan(0);
    expect(adopted).toBeGreaterThan(0);
    const [a, b] = [estimate.marginals(), twin.marginals()];
    const largest = a.reduce((most, v) => Math.max(most, Math.abs(v)), 0);
    for (const [k, v] of a.entries()) expect(Math.abs(b[k]! - v)).toBeLessThan(1e-9 * largest);
    estimate.dispose();
    twin.dispose();
  });

  test("in the smallest slices, dropped after any of them, leaves nothing behind; to the end it has the same condition", () => {
    const used = kernel().memoryUsed();
    const measurements = Array.from({ length: stream.measurements }, (_, k) => whiten(stream.measurement(k), () => 3));
    const sizes = new Int32Array(stream.states).fill(3);
    const build = (budget: number, slices: number): { taken: number; condition: number | undefined } => {
      const information = runSteps(assemblySteps(sizes, (state) => state, measurements, true));
      const steps = baseSteps(information, { queries: 1000, memoryLimit: Number.POSITIVE_INFINITY, route: "automatic" });
      let taken = 0;
      let condition: number | undefined;
      for (let step = steps.next(status.ok); ; ) {
        if (step.done) {
          expect(isSingular(step.value)).toBe(false);
          const base = step.value as Base;
          condition = base.condition;
          base.free();
          break;
        }
        if (taken === slices) {
          steps.return(undefined as never);
          break;
        }
        taken += 1;
        const result = step.value.advance(budget);
        if (result !== status.running) step = steps.next(result);
      }
      information.giveBack();
      expect(kernel().memoryUsed()).toBe(used);
      return { taken, condition };
    };
    const whole = build(1e18, Number.POSITIVE_INFINITY);
    const sliced = build(2e3, Number.POSITIVE_INFINITY);
    expect(sliced.condition).toBe(whole.condition);
    expect(sliced.taken).toBeGreaterThan(20 * whole.taken);
    for (let k = 0; k < 40; k += 1) expect(build(2e3, Math.floor((k * sliced.taken) / 40)).condition).toBeUndefined();
  });

  test("is refused wherever memory runs out, and nothing is held then", () => {
    const { used } = memoryUsage();
    const estimate = pending(chain(200, { fixEvery: 0 }), { route: "orthogonal" });
    expect(refusedUntilThereIsRoom(() => estimate.commit(), 5000)).toBeGreaterThan(20);
    expect(estimate.health().baseRoute).toBe("orthogonal");
    estimate.dispose();
    expect(memoryUsage().used).toBe(used);
  });
});

test.each(routes)("a snapshot keeps the %s route, and what is restored goes on with the same bits", (route) => {
  const stream = chain(160, { fixEvery: 0 });
  const original = new Estimate({ route, track: "all", onDoubt: "answer" });
  const twins: Estimate[] = [];
  for (let s = 0; s < stream.steps; s += 1) {
    const { firstState, lastState, firstMeasurement, lastMeasurement } = stream.step(s);
    const all = [original, ...twins];
    for (const each of all) {
      for (let i = firstState; i < lastState; i += 1) each.addState(3);
      for (let k = firstMeasurement; k < lastMeasurement; k += 1) each.addMeasurement(stream.measurement(k));
    }
    const report = original.commit();
    for (const twin of twins) expect(twin.commit()).toEqual(report);
    if (s % 20 === 5) for (const each of all) each.marginals();
    if (s % 40 === 10) twins.push(Estimate.restore(original.snapshot()));
  }
  const { baseRoute, baseBecause, bound } = original.health();
  if (route !== "automatic") expect(baseRoute).toBe(route);
  for (const twin of twins) {
    expect(twin.health()).toMatchObject({ baseRoute, baseBecause, bound });
    expect(twin.marginals()).toEqual(original.marginals());
    expect(twin.solution()).toEqual(original.solution());
  }
  const other = Estimate.restore(original.snapshot(), { route: "orthogonal" });
  expect(other.health().baseBecause).toBe("orthogonal route, as asked for");
  for (const each of [original, other, ...twins]) each.dispose();
});
