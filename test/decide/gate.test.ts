import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { chiSquare, noncentralChiSquare } from "../../src/decide/distributions.js";
import { ArgumentError, CovarianceError, LevelError } from "../../src/decide/errors.js";
import { gate, gateAll } from "../../src/decide/gate.js";
import { noncentrality } from "../../src/decide/noncentrality.js";
import { covarianceOf, deviationFromRate, draw, randomFactor } from "./monte-carlo.js";

test("a reading by hand: S = [[4, 2], [2, 2]], ν = (2, 3) gives d² = 5", () => {
  // S⁻¹ = [[½, −½], [−½, 1]]: 4 · ½ − 2 · 6 · ½ + 9 = 5; P(χ²(2) > 5) = e^−2.5
  const verdict = gate(
    [2, 3],
    [
      [4, 2],
      [2, 2],
    ],
    { level: 0.05 },
  );
  expect(verdict.statistic).toBeCloseTo(5, 13);
  expect(verdict.probability).toBeCloseTo(Math.exp(-2.5), 14);
  expect(verdict.threshold).toBeCloseTo(5.991464547107982, 12); // NIST e-Handbook 1.3.6.7.4: 5.991
  expect(verdict).toMatchObject({ distribution: "chi-square", degreesOfFreedom: [2], level: 0.05, verdict: "consistent" });
  expect(verdict.because).toBe("A right reading lies this far off or farther 8.2 % of the time; the gate refuses the outermost 5 %.");
  const refused = gate([2, 3], [4, 2, 2, 2], { level: 0.1 });
  expect(refused.verdict).toBe("inconsistent");
  expect(refused.because).toContain("and this is one of them");
});

test("thousands at once are the single gate, candidate by candidate", () => {
  const { normal } = random(6);
  for (const m of [1, 2, 3, 6]) {
    const innovations: number[] = [];
    const covariances: number[] = [];
    const single = Array.from({ length: 300 }, () => {
      const s = covarianceOf(randomFactor(m, normal));
      const nu = s.map(() => 2 * normal());
      innovations.push(...nu);
      covariances.push(...s.flat());
      return gate(nu, s, { level: 0.05 });
    });
    const { mahalanobisSquared, consistent, threshold } = gateAll({ dimension: m, innovations, covariances }, { level: 0.05 });
    expect(threshold).toBe(single[0]!.threshold);
    for (const [k, { statistic, verdict }] of single.entries()) {
      expect(mahalanobisSquared[k]).toBeCloseTo(statistic, 8 - Math.round(Math.log10(statistic + 1)));
      expect(consistent[k]).toBe(verdict === "consistent" ? 1 : 0);
    }
  }
});

describe("rates, 2 000 seeded draws", () => {
  const factor = [[2], [0.5, 0.3], [-1, 0.2, 4]];
  const s = covarianceOf(factor);
  test.each([0.01, 0.05, 0.3])("right readings are refused at the level %d", (level) => {
    expect(
      deviationFromRate(1, level, (normal) => gate(draw(factor, normal), s, { level }).verdict === "inconsistent"),
    ).toBeLessThanOrEqual(1);
  });
  test("a bias of non-centrality λ is refused with the power of the non-central distribution", () => {
    const level = 0.01;
    const lambda = noncentrality(3, level, 0.7);
    const bias = factor.map((row) => (row[0] ?? 0) * Math.sqrt(lambda)); // L (√λ, 0, 0)
    const power = noncentralChiSquare(3, lambda).sf(chiSquare(3).isf(level));
    const refused = (normal: () => number) =>
      gate(
        draw(factor, normal).map((e, i) => e + bias[i]!),
        s,
        { level },
      ).verdict === "inconsistent";
    expect(power).toBeCloseTo(0.7, 11);
    expect(deviationFromRate(2, power, refused)).toBeLessThanOrEqual(1);
  });
});

describe("bad input is named", () => {
  test("one candidate", () => {
    expect(() => gate([1], [[1]], { level: 0 })).toThrow(LevelError);
    expect(() => gate([], [])).toThrow("length of innovation = 0");
    expect(() => gate([1, Number.NaN], [1, 0, 0, 1])).toThrow("innovation[1] = NaN");
    expect(() =>
      gate(
        [1, 2],
        [
          [1, 2],
          [2, 1],
        ],
      ),
    ).toThrow(CovarianceError);
  });
  test("many", () => {
    expect(() => gateAll({ dimension: 2, innovations: [1, 2, 3], covariances: [] })).toThrow("give 2 numbers a candidate");
    expect(() => gateAll({ dimension: 2, innovations: [1, 2], covariances: [1] })).toThrow(ArgumentError);
    expect(() => gateAll({ dimension: 1, innovations: [1, 2], covariances: [1, -1] })).toThrow("candidate 1");
    expect(() => gateAll({ dimension: 1, innovations: [1, Number.NaN], covariances: [1, 1] })).toThrow("candidate 1");
    expect(gateAll({ dimension: 3, innovations: [], covariances: [] }).consistent).toHaveLength(0);
  });
});
