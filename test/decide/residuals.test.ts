// Residual tests, reliability and separability on one small adjustment: a levelling line with two-component readings mixed in.
import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { CovarianceError, DegreesOfFreedomError, LevelError } from "../../src/decide/errors.js";
import { noncentrality } from "../../src/decide/noncentrality.js";
import { biasEffect, reliability } from "../../src/decide/reliability.js";
import { residualTest } from "../../src/decide/residual-test.js";
import { suspectCorrelation } from "../../src/decide/suspects.js";
import { adjustment, deviationFromRate } from "./monte-carlo.js";

// three heights, six readings; readings 4 and 5 are the two components of one instrument and correlated
const design = [
  [1, 0, 0],
  [-1, 1, 0],
  [0, -1, 1],
  [0, 0, 1],
  [1, 0, 1],
  [0, 1, -1],
];
const sigma = [0.5, 1, 2, 1];
const noise = design.map((_, i) => design.map((_, j) => (i === j && i < 4 ? sigma[i]! ** 2 : 0)));
noise[4]![4] = 1;
noise[5]![5] = 0.25;
noise[4]![5] = noise[5]![4] = 0.3;
const net = adjustment(design, noise);
const block = (matrix: number[][], at: number[], to: number[] = at) => at.map((i) => to.map((j) => matrix[i]![j]!));
const errors = (normal: () => number) => {
  const e = sigma.map((s) => s * normal());
  const z = normal();
  return [...e, z, 0.3 * z + 0.4 * normal()]; // L = [[1, 0], [0.3, 0.4]] gives [[1, 0.3], [0.3, 0.25]]
};
const reading = (at: number[], v: number[]) => ({
  residual: at.map((i) => v[i]!),
  noiseCovariance: block(noise, at),
  residualCovariance: block(net.residualCovariance, at),
});

describe("residual test", () => {
  test("one unknown read n times: w = (x − mean) / (σ √((n − 1) / n))", () => {
    const v = [3, -1, -2];
    const verdict = residualTest({ residual: [v[0]!], noiseCovariance: [[4]], residualCovariance: [[(4 * 2) / 3]] }, { level: 0.05 });
    expect(verdict.statistic).toBeCloseTo(3 / (2 * Math.sqrt(2 / 3)), 14);
    expect(Math.abs(verdict.threshold - 1.96)).toBeLessThanOrEqual(0.0005); // NIST e-Handbook, normal table
    expect(verdict).toMatchObject({ distribution: "normal", degreesOfFreedom: [], level: 0.05, verdict: "fine" });
    expect(residualTest({ residual: [-9], noiseCovariance: [4], residualCovariance: [8 / 3] }).verdict).toBe("suspect");
  });

  test("several components: T = vᵀ Qᵥ⁻¹ v, whatever units they are given in", () => {
    const v = net.residuals(errors(random(9).normal));
    const of = reading([4, 5], v);
    const verdict = residualTest(of);
    const [[a, b], [, d]] = of.residualCovariance as [[number, number], [number, number]];
    const [x, y] = of.residual as [number, number];
    expect(verdict.statistic).toBeCloseTo((d * x * x - 2 * b * x * y + a * y * y) / (a * d - b * b), 10);
    expect(verdict).toMatchObject({ distribution: "chi-square", degreesOfFreedom: [2] });
    const scaled = (m: number[][]) => [
      [1e6 * m[0]![0]!, m[0]![1]!],
      [m[1]![0]!, 1e-6 * m[1]![1]!],
    ];
    const other = residualTest({
      residual: [1e3 * x, 1e-3 * y],
      noiseCovariance: scaled(of.noiseCovariance),
      residualCovariance: scaled(of.residualCovariance),
    });
    expect(other.statistic).toBeCloseTo(verdict.statistic, 10);
  });

  test("directions without redundancy do not count; none at all is untestable", () => {
    const half = residualTest({ residual: [2, 0], noiseCovariance: [1, 0, 0, 1], residualCovariance: [0.25, 0, 0, 0] });
    expect(half).toMatchObject({ distribution: "normal", statistic: 4, verdict: "suspect" });
    const none = residualTest({ residual: [0, 0], noiseCovariance: [1, 0, 0, 1], residualCovariance: [1e-12, 0, 0, -1e-13] });
    expect(none.verdict).toBe("untestable");
    expect(none.because).toContain("Measure the same thing once more");
  });

  const level = 0.05;
  const rates: [string, (v: number[]) => { verdict: string }][] = [
    ["w", (v) => residualTest(reading([1], v), { level })],
    ["chi-square of two components", (v) => residualTest(reading([4, 5], v), { level })],
    ["Pope's tau", (v) => residualTest(reading([1], v), { level, varianceFactor: factorOf(v) })],
    ["F of two components", (v) => residualTest(reading([4, 5], v), { level, varianceFactor: factorOf(v) })],
  ];
  const factorOf = (v: number[]) => ({ value: net.weightedSquares(v) / net.redundancy, redundancy: net.redundancy });
  test.each(rates)("%s calls out right readings at the level, 2 000 seeded draws", (_, run) => {
    expect(deviationFromRate(4, level, (normal) => run(net.residuals(errors(normal))).verdict === "suspect")).toBeLessThanOrEqual(1);
  });

  test("tau and F do not change when every standard deviation was stated ten times too small", () => {
    const v = net.residuals(errors(random(5).normal));
    const { value, redundancy } = factorOf(v);
    const wide = v.map((x) => 10 * x);
    for (const at of [[1], [4, 5]]) {
      const verdict = residualTest(reading(at, v), { varianceFactor: { value, redundancy } });
      const tenfold = residualTest(reading(at, wide), { varianceFactor: { value: 100 * value, redundancy } });
      expect(tenfold.statistic / verdict.statistic).toBeCloseTo(1, 11); // F here is 2 055: one digit in 16 for each factor 10 of r σ̂₀² over the rest
    }
  });

  test("bad input is named", () => {
    const of = reading([4, 5], [0, 0, 0, 0, 1, 1]);
    expect(() => residualTest(of, { level: 0 })).toThrow(LevelError);
    expect(() => residualTest(of, { varianceFactor: { value: 1, redundancy: 2 } })).toThrow(DegreesOfFreedomError);
    expect(() => residualTest(of, { varianceFactor: { value: 0, redundancy: 5 } })).toThrow("varianceFactor.value = 0");
    expect(() => residualTest({ ...of, residual: [Number.NaN, 0] })).toThrow("residual[0] = NaN");
    expect(() => residualTest({ ...of, residual: [1] })).toThrow(CovarianceError);
  });
});

describe("reliability", () => {
  // Level circuit of an open course text on least squares for surveyors: seven height differences to two unknown heights, redundancy
  // numbers 3/4 (four readings of Q) and 2/3 (three of R), sum 5 = 7 − 2
  test("the level circuit: redundancy 3/4 and 2/3, bias σ √(λ₀ / r)", () => {
    const circuit = adjustment(
      Array.from({ length: 7 }, (_, k) => (k < 4 ? [1, 0] : [0, 1])),
      Array.from({ length: 7 }, (_, i) => Array.from({ length: 7 }, (_, j) => (i === j ? 9 : 0))),
    );
    let sum = 0;
    for (let k = 0; k < 7; ++k) {
      const of = reliability({ dimension: 1, noiseCovariance: [9], residualCovariance: [circuit.residualCovariance[k]![k]!] });
      const r = k < 4 ? 3 / 4 : 2 / 3;
      expect(of.redundancy).toBeCloseTo(r, 13);
      expect(of.noncentrality).toBeCloseTo(17.074646805187548, 11); // Baarda, level 0.001, power 0.80
      expect(of.minimalDetectableBias[0]).toBeCloseTo(3 * Math.sqrt(17.074646805187548 / r), 10);
      expect(of.externalReliability).toBeCloseTo(Math.sqrt((17.074646805187548 * (1 - r)) / r), 10);
      expect(of.verdict).toBe("well controlled");
      sum += of.redundancy;
    }
    expect(sum).toBeCloseTo(5, 12);
  });

  test("redundancy numbers of all readings add up to the degrees of freedom", () => {
    const of = [[0], [1], [2], [3], [4, 5]].map((at) =>
      reliability({ dimension: at.length, noiseCovariance: block(noise, at), residualCovariance: block(net.residualCovariance, at) }),
    );
    expect(of.reduce((sum, { redundancy }) => sum + redundancy, 0)).toBeCloseTo(net.redundancy, 12);
  });

  const level = 0.01;
  test.each([0.5, 0.8, 0.95])("a bias of the detectable size is found with power %d, 2 000 seeded draws", (power) => {
    for (const [at, component] of [
      [[1], 0],
      [[4, 5], 0],
      [[4, 5], 1],
    ] as const) {
      const indices = [...at];
      const { minimalDetectableBias } = reliability(
        { dimension: at.length, noiseCovariance: block(noise, indices), residualCovariance: block(net.residualCovariance, indices) },
        { level, power },
      );
      const found = (normal: () => number) => {
        const e = errors(normal);
        e[at[component]!]! += minimalDetectableBias[component]!;
        return residualTest(reading(indices, net.residuals(e)), { level }).verdict === "suspect";
      };
      expect(deviationFromRate(7, power, found)).toBeLessThanOrEqual(1);
    }
  });

  test("external reliability of one component is the effect on all states in their own units, K ∇", () => {
    const at = 2;
    const { minimalDetectableBias, externalReliability } = reliability({
      dimension: 1,
      noiseCovariance: [noise[at]![at]!],
      residualCovariance: [net.residualCovariance[at]![at]!],
    });
    const gain = net.gain.map((row) => [row[at]!]);
    const { effect, standardized } = biasEffect(gain, minimalDetectableBias, net.covariance, 3);
    expect(standardized).toBeCloseTo(externalReliability, 10);
    for (const [k, row] of gain.entries()) expect(effect[k]).toBeCloseTo(row[0]! * minimalDetectableBias[0]!, 12);
  });

  test("grades: nothing controls a reading without redundancy", () => {
    const of = (r: number) => reliability({ dimension: 1, noiseCovariance: [1], residualCovariance: [r] });
    expect([0.5, 0.2, 0.05, 0.001].map((r) => of(r).verdict)).toEqual([
      "well controlled",
      "fairly controlled",
      "weakly controlled",
      "uncontrolled",
    ]);
    expect(of(0)).toMatchObject({ redundancy: 0, externalReliability: Infinity, verdict: "uncontrolled" });
    expect(of(0).minimalDetectableBias[0]).toBe(Infinity);
    expect(() => reliability({ dimension: 1, noiseCovariance: [1], residualCovariance: [0.5] }, { power: 0.0005 })).toThrow(
      "power = 0.0005",
    );
  });

  test("several dimensions take their own non-centrality", () => {
    const of = reliability({ dimension: 2, noiseCovariance: [1, 0, 0, 4], residualCovariance: [0.5, 0, 0, 1] });
    expect(of.noncentrality).toBe(noncentrality(2, 0.001, 0.8));
    expect([...of.minimalDetectableBias].map((b) => b ** 2 / of.noncentrality)).toEqual([2, 16].map((x) => expect.closeTo(x, 12)));
  });
});

describe("two suspects", () => {
  const of = (dimensions: [number, number], first: number[][], second: number[][], between: number[][]) =>
    suspectCorrelation({ dimensions, first, second, between });

  test("two readings of one unknown cannot be told apart, n readings are correlated by 1 / (n − 1)", () => {
    // residual covariance of n equal readings: I − 1/n
    for (const n of [3, 4, 11, 100]) {
      const pair = of([1, 1], [[1 - 1 / n]], [[1 - 1 / n]], [[-1 / n]]);
      expect(pair.correlation).toBeCloseTo(1 / (n - 1), 14);
      expect(pair.verdict).toBe("separable");
    }
    const two = suspectCorrelation(
      { dimensions: [1, 1], first: [0.5], second: [0.5], between: [-0.5] },
      { names: ["reading 7", "reading 9"] },
    );
    expect(two).toMatchObject({ correlation: expect.closeTo(1, 14), verdict: "not separable" });
    expect(two.because).toContain("reading 7 and reading 9");
  });

  test("of several components: the largest canonical correlation, the same for v and for R⁻¹ v", () => {
    // diagonal blocks: the correlations are those of the pairs of components
    expect(
      of(
        [2, 2],
        [
          [1, 0],
          [0, 4],
        ],
        [
          [9, 0],
          [0, 1],
        ],
        [
          [1.5, 0],
          [0, 0.4],
        ],
      ).correlation,
    ).toBeCloseTo(0.5, 13);
    const q = net.residualCovariance;
    const plain = of([1, 2], block(q, [1]), block(q, [4, 5]), block(q, [1], [4, 5]));
    // R⁻¹ of readings 4 and 5: [[0.25, −0.3], [−0.3, 1]] / 0.16
    const w = [
      [0.25 / 0.16, -0.3 / 0.16],
      [-0.3 / 0.16, 1 / 0.16],
    ];
    const times = (a: number[][], b: number[][]) => a.map((row) => b[0]!.map((_, j) => row.reduce((sum, x, k) => sum + x * b[k]![j]!, 0)));
    const weighted = of([1, 2], block(q, [1]), times(times(w, block(q, [4, 5])), w), times(block(q, [1], [4, 5]), w));
    expect(plain.correlation).toBeGreaterThan(0.1);
    expect(weighted.correlation).toBeCloseTo(plain.correlation, 11);
    const turned = of([2, 1], block(q, [4, 5]), block(q, [1]), block(q, [4, 5], [1]));
    expect(turned.correlation).toBeCloseTo(plain.correlation, 12);
  });

  test("a reading without redundancy is no suspect", () => {
    expect(() => of([1, 1], [[0]], [[1]], [[0]])).toThrow(CovarianceError);
    expect(() => suspectCorrelation({ dimensions: [1, 1], first: [1], second: [1], between: [0] }, { limit: 1 })).toThrow(LevelError);
  });
});
