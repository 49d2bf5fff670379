// A network assessed as a whole, against hand calculation, dense algebra of a general library, and simulated truth.
import { inverse, Matrix } from "ml-matrix";
import { beforeAll, describe, expect, test } from "vitest";
import { type AssessmentOptions, assess } from "../../src/decide/assess/assessment.js";
import { movements } from "../../src/decide/assess/movements.js";
import { relativePrecision, statePrecisions } from "../../src/decide/assess/precision.js";
import { putBack, screenReadings } from "../../src/decide/assess/screening.js";
import { weaknesses } from "../../src/decide/assess/weakness.js";
import { quayMonitoring } from "../../src/demo/monitoring.js";
import { yardPatrol } from "../../src/demo/patrol.js";
import { Estimate } from "../../src/estimate/estimate.js";
import { applyEntry } from "../../src/log/apply.js";
import type { LogEntry, ReadingEntry } from "../../src/log/entries.js";
import { Adjustment } from "../../src/model/adjustment.js";
import type { Reading, StateDeclaration } from "../../src/model/reading.js";
import { huber } from "../../src/model/robust.js";
import { random } from "../../src/support/random.js";
import { initFacade } from "../support/facade.js";
import { covarianceOf, adjustment as denseAdjustment, deviationFromRate, draw, randomFactor } from "./monte-carlo.js";

beforeAll(initFacade);

const estimates: Estimate[] = [];
function networkOf(states: readonly StateDeclaration[], readings: readonly Reading[]) {
  const estimate = new Estimate();
  estimates.push(estimate);
  const adjustment = new Adjustment(estimate);
  for (const state of states) adjustment.addState(state);
  for (const reading of readings) adjustment.addReading(reading);
  return { estimate, adjustment };
}
function networkOfLog(entries: Iterable<LogEntry>) {
  const estimate = new Estimate({ track: "all" });
  estimates.push(estimate);
  const adjustment = new Adjustment(estimate);
  for (const entry of entries) applyEntry(adjustment, entry);
  return { estimate, adjustment };
}

const height = (name: string, value?: number): StateDeclaration => ({
  name,
  kind: "height",
  fixed: value !== undefined,
  ...(value === undefined ? {} : { value: Float64Array.of(value) }),
});
const levelled = (from: string, to: string, value: number, deviation = 0.001, name = `${from}${to}`): Reading => ({
  kind: "height-difference",
  states: [from, to],
  value: Float64Array.of(value),
  standardDeviations: Float64Array.of(deviation),
  name,
});

describe("one height levelled four times from a fixed one, one run 8 mm off, by hand", () => {
  const runs = [0, 0, 0, 0.008].map((value, k) => levelled("A", "P", 1 + value, 0.001, `run ${k + 1}`));
  const network = () => networkOf([height("A", 10), height("P")], runs);

  test("the run is suspect: discrepancy 8 mm, redundancy 3/4, w = 6 / √(3/4), detectable bias δ₀ σ / √r", () => {
    const { screening, globalTest, globalTestWithoutSuspects } = assess(network(), { level: 0.05 });
    // residuals −2, −2, −2, 6 mm: Ω = 12 + 36; without the run nothing is left
    expect(globalTest!.statistic).toBeCloseTo(48, 9);
    expect(globalTest!.degreesOfFreedom).toEqual([3]);
    expect(globalTestWithoutSuspects!.statistic).toBeCloseTo(0, 12);
    expect(globalTestWithoutSuspects!.degreesOfFreedom).toEqual([2]);
    expect(screening.tests).toBe(4);
    expect(screening.testLevel).toBeCloseTo(1 - 0.95 ** 0.25, 12); // Šidák (1967)
    const [suspect, ...others] = screening.suspects;
    expect(others).toEqual([]);
    expect(suspect!.reading.name).toBe("run 4");
    expect(suspect!.discrepancy[0]).toBeCloseTo(0.008, 12);
    expect(suspect!.standardDeviations[0]).toBeCloseTo(0.001 * Math.sqrt(4 / 3), 12);
    expect(suspect!.verdict.statistic).toBeCloseTo(6 / Math.sqrt(3 / 4), 9);
    expect(suspect!.reliability.redundancy).toBeCloseTo(3 / 4, 12);
    expect(suspect!.confusable).toEqual([]);
  });

  test("at Baarda's level of 0.001 for the single test and a power of 0.80, δ₀ is 4.13", () => {
    // Baarda (1968), "A testing procedure for use in geodetic networks": δ₀ = 4.13 for α₀ = 0.001, β = 0.80. Four tests: family 1 − 0.999⁴.
    const { suspects } = screenReadings(network(), { level: 1 - 0.999 ** 4 });
    expect(suspects[0]!.reliability.minimalDetectableBias[0]! / (0.001 / Math.sqrt(3 / 4))).toBeCloseTo(4.13, 2);
  });

  test("values are of all readings, or of those left when suspects are set aside; putting back is as if nothing had happened", () => {
    const kept = network();
    assess(kept);
    expect(kept.adjustment.value("P")[0]).toBeCloseTo(11.002, 12);
    const without = network();
    const assessment = assess(without, { setAsideSuspects: true });
    expect(assessment).toMatchObject({ suspectsSetAside: true, counts: { states: 1, fixed: 1, unknowns: 1, readings: 4 } });
    expect(without.adjustment.value("P")[0]).toBeCloseTo(11, 12);
    expect(assessment.states[0]!.standardDeviations[0]).toBeCloseTo(0.001 / Math.sqrt(3), 12);
    putBack(without, assessment.screening.suspects);
    expect(without.adjustment.value("P")[0]).toBeCloseTo(11.002, 12);
    expect(without.adjustment.covariance("P")[0]).toBeCloseTo(0.25e-6, 15);
  });

  test("a limit between the semi-axis and none: 1.96 σ / 2 = 0.98 mm", () => {
    const failing = (limit: number) => assess(network(), { limits: { length: limit } }).failing;
    expect(failing(0.9799e-3)).toBe(1);
    expect(failing(0.98e-3)).toBe(0);
    expect(() => assess(network(), { limits: { angle: 1 } })).toThrow(/no estimated state is measured in angles/);
  });
});

test("two runs to a height that nothing else controls: a blunder may be in either, and each is named with the other", () => {
  // Redundancies 1/2 and 1/2, residuals ∓5 mm: |w| = 5 / √(1/2) for both, correlation 1.
  const { suspects } = screenReadings(
    networkOf([height("A", 10), height("P")], [levelled("A", "P", 1, 0.001, "first"), levelled("A", "P", 1.01, 0.001, "second")]),
  );
  expect(suspects).toHaveLength(1);
  expect(Math.abs(suspects[0]!.verdict.statistic)).toBeCloseTo(5 / Math.sqrt(1 / 2), 8);
  const names = [suspects[0]!.reading.name, suspects[0]!.confusable[0]!.reading.name].sort();
  expect(names).toEqual(["first", "second"]);
  expect(suspects[0]!.confusable[0]!.correlation).toBeCloseTo(1, 9);
});

test("two suspects at the far ends of one loop are not both set aside: the loop would come open", () => {
  // A loop of six equal runs that does not close: every |w| is alike, and one run out closes it.
  const names = ["A", "B", "C", "D", "E", "F"];
  const runs = names.map((from, k) => levelled(from, names[(k + 1) % 6]!, k === 5 ? -4.95 : 1));
  const network = networkOf([height("A", 0), ...names.slice(1).map((name) => height(name))], runs);
  const { suspects } = screenReadings(network);
  expect(suspects).toHaveLength(1);
  expect(Math.abs(suspects[0]!.discrepancy[0]!)).toBeCloseTo(0.05, 10);
  expect(suspects[0]!.confusable).toHaveLength(5);
});

test("standard deviations stated ten times too small are not a hundred blunders: screening says so and sets nothing aside", () => {
  const { normal } = random(3);
  const runs = Array.from({ length: 60 }, (_, k) => levelled("A", "P", 1 + 0.01 * normal(), 0.001, `run ${k}`));
  const network = networkOf([height("A", 0), height("P")], runs);
  const { screening, globalTest, suspectsSetAside } = assess(network, { setAsideSuspects: true });
  expect(screening.overwhelmed).toBeGreaterThan(10);
  expect(screening.suspects).toEqual([]);
  expect(suspectsSetAside).toBe(false);
  expect(globalTest!.verdict).toBe("more than stated");
  expect([...network.adjustment.readings()]).toHaveLength(60);
});

test("a network without redundancy has nothing to test; its readings are uncontrolled", () => {
  const { globalTest, screening } = assess(networkOf([height("A", 0), height("P")], [levelled("A", "P", 1)]));
  expect(globalTest).toBeUndefined();
  expect(screening).toMatchObject({ suspects: [], tests: 0, control: { grades: { uncontrolled: 1 } } });
});

test("robust weights take the place of the tests of single readings, so both at once are refused", () => {
  const estimate = new Estimate();
  estimates.push(estimate);
  const adjustment = new Adjustment(estimate, { robust: huber() });
  adjustment.addState(height("A", 0));
  adjustment.addState(height("P"));
  for (const value of [1, 1.001, 0.999, 2]) adjustment.addReading(levelled("A", "P", value, 0.001, `run ${value}`));
  expect(() => assess({ adjustment, estimate })).toThrow(/robust weights/);
});

describe("coordinate differences with full covariances, one of them spoiled, against dense algebra", () => {
  // Five points in space, every pair measured: a linear network. Noise of each reading is a random covariance.
  const source = random(77);
  const points = Array.from({ length: 5 }, (_, k) => ({ name: `P${k}`, at: [k * 10, (k * k) % 7, k % 3] }));
  const pairs = points.flatMap((_, i) => points.map((_, j) => [i, j] as const)).filter(([i, j]) => i < j);
  const factors = pairs.map(() => randomFactor(3, source.normal).map((row) => row.map((entry) => 1e-3 * entry)));
  const spoiled = 4;
  const values = pairs.map(([i, j], k) => {
    const noise = draw(factors[k]!, source.normal);
    return [0, 1, 2].map((c) => points[j]!.at[c]! - points[i]!.at[c]! + noise[c]! + (k === spoiled && c === 1 ? 0.05 : 0));
  });
  const covariances = factors.map((factor) => covarianceOf(factor));
  const network = () =>
    networkOf(
      points.map(({ name, at }, k) => ({ name, kind: "point-3d", fixed: k === 0, ...(k === 0 ? { value: Float64Array.from(at) } : {}) })),
      pairs.map(([i, j], k) => ({
        kind: "coordinate-difference",
        states: [points[i]!.name, points[j]!.name],
        value: Float64Array.from(values[k]!),
        covariance: Float64Array.from(covariances[k]!.flat()),
        name: `${i}-${j}`,
      })),
    );
  const dense = (keep: readonly number[]) => {
    const rows = keep.length * 3;
    const design = Array.from({ length: rows }, () => new Array<number>(12).fill(0));
    const noise = Array.from({ length: rows }, () => new Array<number>(rows).fill(0));
    for (const [at, k] of keep.entries())
      for (let c = 0; c < 3; ++c) {
        const [i, j] = pairs[k]!;
        if (i > 0) design[3 * at + c]![3 * (i - 1) + c] = -1;
        design[3 * at + c]![3 * (j - 1) + c] = 1;
        for (let d = 0; d < 3; ++d) noise[3 * at + c]![3 * at + d] = covariances[k]![c]![d]!;
      }
    return { ...denseAdjustment(design, noise), noise, measured: keep.flatMap((k) => values[k]!) };
  };
  const all = pairs.map((_, k) => k);

  test("the suspect's statistic is vᵀ Qᵥ⁻¹ v with all readings in", () => {
    const { suspects } = screenReadings(network());
    expect(suspects.map(({ reading }) => reading.name)).toEqual([`${pairs[spoiled]!.join("-")}`]);
    const truth = dense(all);
    const v = Matrix.columnVector(truth.residuals(truth.measured).slice(3 * spoiled, 3 * spoiled + 3));
    const q = new Matrix(truth.residualCovariance).subMatrix(3 * spoiled, 3 * spoiled + 2, 3 * spoiled, 3 * spoiled + 2);
    const expected = v.transpose().mmul(inverse(q)).mmul(v).get(0, 0);
    expect(suspects[0]!.verdict.statistic / expected).toBeCloseTo(1, 8);
    const r = new Matrix(covariances[spoiled]!);
    expect(suspects[0]!.reliability.redundancy).toBeCloseTo(inverse(r).mmul(q).trace(), 9);
  });

  test("states and pairs are as sure as (Aᵀ R⁻¹ A)⁻¹ of the readings that count", () => {
    for (const setAsideSuspects of [false, true]) {
      const one = network();
      const { states } = assess(one, { setAsideSuspects });
      const truth = dense(setAsideSuspects ? all.filter((k) => k !== spoiled) : all);
      for (const { name, covariance } of states) {
        const at = 3 * (Number(name.slice(1)) - 1);
        for (let e = 0; e < 9; ++e) {
          const expected = truth.covariance[at + Math.floor(e / 3)]![at + (e % 3)]!;
          expect(Math.abs(covariance[e]! - expected)).toBeLessThan(1e-9 * truth.covariance[at]![at]!);
        }
      }
      const { covariance, difference } = relativePrecision(one, ["P1", "P3"]);
      const c = (i: number, j: number) => truth.covariance[i]![j]!;
      for (let e = 0; e < 9; ++e) {
        const [i, j] = [Math.floor(e / 3), e % 3];
        const expected = c(i, j) + c(6 + i, 6 + j) - c(i, 6 + j) - c(6 + i, j);
        expect(Math.abs(covariance[e]! - expected)).toBeLessThan(1e-9 * (c(0, 0) + c(6, 6)));
      }
      const solved = new Matrix(truth.gain).mmul(Matrix.columnVector(truth.measured)).to1DArray();
      for (let k = 0; k < 3; ++k) expect(difference[k]).toBeCloseTo(solved[6 + k]! - solved[k]!, 10);
    }
  });
});

test("states come worst first within their quantity, fixed ones not at all, each with the region of its position", () => {
  const point = (name: string, x: number, y: number, fixed = false): StateDeclaration => ({
    name,
    kind: "point-2d",
    fixed,
    value: Float64Array.of(x, y),
  });
  const at = (state: string, x: number, y: number, sx: number, sy: number): Reading => ({
    kind: "position",
    states: [state],
    value: Float64Array.of(x, y),
    standardDeviations: Float64Array.of(sx, sy),
  });
  const network = networkOf(
    [point("F", 0, 0, true), point("P", 10, 0), point("Q", 0, 10), { name: "o", kind: "orientation", fixed: false }],
    [
      at("P", 10, 0, 0.002, 0.001),
      at("Q", 0, 10, 0.001, 0.004),
      { kind: "direction", states: ["F", "P", "o"], value: Float64Array.of(1), standardDeviations: Float64Array.of(1e-4) },
    ],
  );
  network.adjustment.solve();
  const states = statePrecisions(network, { confidence: 0.95 });
  expect(states.map(({ name }) => name)).toEqual(["Q", "P", "o"]);
  // √(−2 ln 0.05) = 2.4477: the exact quantile of two dimensions
  const scale = Math.sqrt(-2 * Math.log(0.05));
  expect(states[0]!.semiAxes[0]).toMatchObject({ length: expect.closeTo(0.004 * scale, 12), bearing: expect.closeTo(0, 9) });
  expect(states[1]!.semiAxes[0]).toMatchObject({ length: expect.closeTo(0.002 * scale, 12), bearing: expect.closeTo(Math.PI / 2, 9) });
  expect(states[1]!.semiAxes[1]).toMatchObject({ length: expect.closeTo(0.001 * scale, 12), bearing: expect.closeTo(0, 9) });
  // the orientation: the sight, and P's share across it
  expect(states[2]!.standardDeviations[0]).toBeCloseTo(Math.hypot(1e-4, 0.001 / 10), 9);

  // P and Q are independent; their distance runs along (−1, 1) / √2
  const pair = relativePrecision(network, ["P", "Q"]);
  expect(pair.length).toBeCloseTo(Math.sqrt(200), 9);
  expect(pair.lengthDeviation).toBeCloseTo(Math.sqrt((0.002 ** 2 + 0.001 ** 2 + 0.001 ** 2 + 0.004 ** 2) / 2), 9);
  expect(relativePrecision(network, ["F", "P"]).standardDeviations[0]).toBeCloseTo(0.002, 12);
  expect(() => relativePrecision(network, ["P", "P"])).toThrow(/two different states/);
  expect(() => relativePrecision(network, ["P", "o"])).toThrow(/no coordinates in common/);
});

test("what determines a height: every reading by its share of the variance, and what its neighbour brings", () => {
  // B from A to 2 mm; P from B twice, to 1 and 3 mm: weights 0.9 and 0.1. Variance of P: 4 + 0.81 × 1 + 0.01 × 9 = 4.9 mm², given B 0.9 mm².
  // A dangling run from P says nothing about it.
  const network = networkOf(
    [height("A", 0), height("B"), height("P"), height("D")],
    [
      levelled("A", "B", 1, 0.002, "long"),
      levelled("B", "P", 1, 0.001, "good"),
      levelled("B", "P", 1, 0.003, "poor"),
      levelled("P", "D", 1, 0.001, "dangling"),
    ],
  );
  network.adjustment.solve();
  const [weakness] = weaknesses(network, ["P"]);
  expect(weakness!.deviation).toBeCloseTo(Math.sqrt(4.9e-6), 12);
  // with D held as well: 1 / (1 + 1/9 + 1) mm²
  expect(weakness!.deviationAlone).toBeCloseTo(Math.sqrt(1e-6 / (2 + 1 / 9)), 12);
  expect(weakness!.readings).toBe(3);
  expect(weakness!.determinedBy.map(({ reading, share }) => [reading.name, Number((share * 4.9).toFixed(9))])).toEqual([
    ["long", 4],
    ["good", 0.81],
    ["poor", 0.09],
  ]);
});

describe("the quay of Kestermouth against its truth", () => {
  const { entries, truth } = quayMonitoring();
  let network: ReturnType<typeof networkOfLog>;
  let assessment: ReturnType<typeof assess>;
  beforeAll(() => {
    network = networkOfLog(entries);
    assessment = assess(network, { setAsideSuspects: true });
  });

  test("the three blunders are found, nothing else is doubted, and the rest fits as stated", () => {
    const found = new Map(assessment.screening.suspects.map((suspect) => [suspect.reading.name!, suspect]));
    expect([...found.keys()].sort()).toEqual(truth.blunders.map(({ reading }) => reading).sort());
    for (const { reading, offset } of truth.blunders) {
      const { discrepancy, standardDeviations } = found.get(reading)!;
      // Four standard deviations: passed once in sixteen thousand.
      expect(Math.abs(discrepancy[0]! - offset) / standardDeviations[0]!).toBeLessThan(4);
    }
    expect(assessment.globalTest!.verdict).toBe("more than stated");
    expect(assessment.globalTestWithoutSuspects!.verdict).toBe("as stated");
  });

  test("the marks found to have moved are about the settled bollard, and they have", () => {
    const marks = [
      ...new Set(
        Object.keys(truth.positions)
          .filter((name) => name.includes("@"))
          .map((name) => name.split("@")[0]!),
      ),
    ];
    const pairs = marks.flatMap((mark) => [2, 3, 4, 5, 6].map((epoch) => [`${mark}@1`, `${mark}@${epoch}`] as const));
    const moved = movements(network, pairs).filter(({ verdict }) => verdict.verdict === "moved");
    const names = new Set(moved.map(({ first }) => first.split("@")[0]!));
    const really = new Set(truth.settlement.moved.map(({ mark }) => mark));
    for (const name of names) expect(really.has(name), name).toBe(true);
    expect(names.has(truth.settlement.bollard)).toBe(true);
    for (const { second } of moved) expect(Number(second.split("@")[1])).toBeGreaterThanOrEqual(truth.settlement.fromEpoch);
  });
});

describe("the yard patrol: readings of two and three rows, one spoiled by two metres", () => {
  const entries = [...yardPatrol({ rounds: 2 }).entries];
  const screened = (prefix: string) => {
    const alike = entries.filter((entry): entry is ReadingEntry => entry.type === "reading" && entry.name!.startsWith(prefix));
    const victim = alike[Math.floor(alike.length / 2)]!;
    const spoiled = { ...victim, value: victim.value.map((number, k) => (k === 1 ? number + 2 : number)) };
    const network = networkOfLog(entries.map((entry) => (entry === victim ? spoiled : entry)));
    return { victim, suspects: screenReadings(network).suspects };
  };

  test("a place met again: found, only that, and by its right size", () => {
    const { victim, suspects } = screened("again/");
    expect(suspects.map(({ reading }) => reading.name)).toEqual([victim.name]);
    // Four standard deviations: passed once in sixteen thousand.
    expect(Math.abs(suspects[0]!.discrepancy[1]! - 2) / suspects[0]!.standardDeviations[1]!).toBeLessThan(4);
    expect(suspects[0]!.verdict.degreesOfFreedom).toEqual([3]);
  });

  test("a step between neighbours: found, or named as what the suspect cannot be told from", () => {
    const { victim, suspects } = screened("step/");
    expect(suspects).toHaveLength(1);
    const named = [suspects[0]!.reading, ...suspects[0]!.confusable.map(({ reading }) => reading)];
    expect(named.map(({ name }) => name)).toContain(victim.name);
  });
});

describe("2 000 seeded simulations of a small network against its truth", () => {
  // A braced quadrilateral with a point in it: nonlinear, 2 free points, redundancy 5.
  const truth: Record<string, [number, number]> = { A: [0, 0], B: [400, 30], C: [350, 420], P: [180, 190], Q: [60, 310] };
  const ends = ["AP", "BP", "CP", "AQ", "CQ", "PQ", "BQ", "AP", "CQ"];
  const legs = ends.map(([from, to], k) => ({ from: from!, to: to!, name: `${from}${to} ${k}` }));
  const deviation = 0.005;
  const simulate = (normal: () => number) =>
    networkOf(
      Object.entries(truth).map(([name, at]) => ({ name, kind: "point-2d", fixed: "ABC".includes(name), value: Float64Array.from(at) })),
      legs.map(({ from, to, name }) => ({
        kind: "distance",
        states: [from, to],
        value: Float64Array.of(Math.hypot(truth[to]![0] - truth[from]![0], truth[to]![1] - truth[from]![1]) + deviation * normal()),
        standardDeviations: Float64Array.of(deviation),
        name,
      })),
    );
  const assessed = (normal: () => number, options?: AssessmentOptions) => {
    const network = simulate(normal);
    const assessment = assess(network, options);
    network.estimate.dispose();
    return assessment;
  };

  test("the 95 % ellipse of each point covers the true point 95 % of the time", () => {
    for (const name of ["P", "Q"]) {
      const covers = (normal: () => number) => {
        const { value, semiAxes } = assessed(normal, {}).states.find((state) => state.name === name)!;
        const [dx, dy] = [value[0]! - truth[name]![0], value[1]! - truth[name]![1]];
        const [major, minor] = semiAxes as [(typeof semiAxes)[0], (typeof semiAxes)[0]];
        const along = dx * Math.sin(major.bearing!) + dy * Math.cos(major.bearing!);
        const across = dx * Math.cos(major.bearing!) - dy * Math.sin(major.bearing!);
        return (along / major.length) ** 2 + (across / minor.length) ** 2 <= 1;
      };
      expect(deviationFromRate(name === "P" ? 11 : 12, 0.95, covers)).toBeLessThan(1);
    }
  });

  test("the global test rejects, and some reading is doubted, at the stated rates", () => {
    expect(deviationFromRate(13, 0.05, (normal) => assessed(normal).globalTest!.verdict !== "as stated")).toBeLessThan(1);
    // Šidák's level is safe for the correlated residuals of one adjustment: the rate is at most the stated one (Šidák 1967).
    const rate = 0.05;
    const { normal } = random(14);
    let alarms = 0;
    for (let k = 0; k < 2000; ++k) alarms += assessed(normal).screening.suspects.length > 0 ? 1 : 0;
    expect(alarms).toBeLessThan(2000 * rate + 4 * Math.sqrt(2000 * rate * (1 - rate)));
    expect(alarms).toBeGreaterThan(2000 * rate * 0.3);
  });
});
