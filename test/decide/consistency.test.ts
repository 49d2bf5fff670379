import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { normalizedSquaresTest, whitenessTest } from "../../src/decide/consistency.js";
import { ArgumentError, DegreesOfFreedomError, LevelError } from "../../src/decide/errors.js";
import { deviationFromRate } from "./monte-carlo.js";

describe("normalized squares over a run", () => {
  const run = (normal: () => number, scale = 1) => {
    const dimensions = Array.from({ length: 40 }, (_, k) => 1 + (k % 3));
    const squares = dimensions.map((m) => {
      let sum = 0;
      for (let i = 0; i < m; ++i) sum += (scale * normal()) ** 2;
      return sum;
    });
    return { squares, dimensions };
  };

  test("fifty runs of a two-dimensional error: the mean lies between 1.48 and 2.59", () => {
    // Bar-Shalom, Li, Kirubarajan (2001), 5.4.2: χ²(100) at 2.5 % and 97.5 % is 74.2 and 129.6, over 50 runs 1.48 and 2.59
    const of = normalizedSquaresTest({ squares: new Array(50).fill(2), dimensions: 2 });
    expect(of.lowerThreshold / 50).toBeCloseTo(1.48, 2);
    expect(of.threshold / 50).toBeCloseTo(2.59, 2);
    expect(of).toMatchObject({ verdict: "consistent", ratio: 1, degreesOfFreedom: [100] });
  });

  test("says too sure and too cautious", () => {
    const sure = normalizedSquaresTest(run(random(1).normal, 1.6));
    expect(sure.verdict).toBe("too sure");
    expect(sure.because).toContain("too small for what happened");
    expect(normalizedSquaresTest(run(random(1).normal, 0.6)).verdict).toBe("too cautious");
  });

  test("a right estimator is doubted at the level, 2 000 seeded draws", () => {
    expect(
      deviationFromRate(16, 0.1, (normal) => normalizedSquaresTest(run(normal), { level: 0.1 }).verdict !== "consistent"),
    ).toBeLessThanOrEqual(1);
  });

  test("bad input is named", () => {
    expect(() => normalizedSquaresTest({ squares: [], dimensions: 1 })).toThrow("length of squares = 0");
    expect(() => normalizedSquaresTest({ squares: [1, -2], dimensions: 1 })).toThrow("squares[1] = -2");
    expect(() => normalizedSquaresTest({ squares: [1, 2], dimensions: [1] })).toThrow(ArgumentError);
    expect(() => normalizedSquaresTest({ squares: [1, 2], dimensions: [1, 0] })).toThrow(DegreesOfFreedomError);
    expect(() => normalizedSquaresTest({ squares: [1], dimensions: 1 }, { level: 2 })).toThrow(LevelError);
  });
});

describe("whiteness", () => {
  /** Innovations with correlation `carry` from one step to the next. */
  const run = (normal: () => number, steps: number, m: number, carry = 0) => {
    const out = Array.from({ length: steps * m }, normal);
    for (let k = m; k < out.length; ++k) out[k] = carry * out[k - m]! + Math.sqrt(1 - carry * carry) * out[k]!;
    return out;
  };

  test("by hand: alternating signs are correlated by −(N − 1) / N at lag 1 and (N − 2) / N at lag 2", () => {
    const innovations = Array.from({ length: 20 }, (_, k) => (k % 2 ? -3 : 3));
    const of = whitenessTest({ innovations, dimension: 1 }, { lags: 2 });
    expect([...of.correlations]).toEqual([expect.closeTo(-19 / 20, 14), expect.closeTo(18 / 20, 14)]);
    // Ljung, Box (1978): N (N + 2) Σ ρₗ² / (N − l)
    expect(of.statistic).toBeCloseTo(20 * 22 * ((19 / 20) ** 2 / 19 + (18 / 20) ** 2 / 18), 11);
    expect(of.verdict).toBe("correlated in time");
    expect(of.because).toContain("1 step apart");
  });

  test.each([1, 3])("white innovations of dimension %d are doubted at the level, 2 000 seeded draws", (dimension) => {
    // the χ² law of the statistic is asymptotic; at 200 steps its error is below the binomial bound
    const alarm = (normal: () => number) =>
      whitenessTest({ innovations: run(normal, 200, dimension), dimension }, { level: 0.1, lags: 5 }).verdict !== "white";
    expect(deviationFromRate(17, 0.1, alarm)).toBeLessThanOrEqual(1);
  });

  test("a carry of 0.3 from step to step is found, and a common scale does not matter", () => {
    const innovations = run(random(2).normal, 400, 2, 0.3);
    const of = whitenessTest({ innovations, dimension: 2 });
    expect(of.verdict).toBe("correlated in time");
    expect(of.correlations[0]).toBeGreaterThan(0.2);
    expect(whitenessTest({ innovations: innovations.map((x) => 1e6 * x), dimension: 2 }).statistic).toBeCloseTo(of.statistic, 9);
  });

  test("bad input is named", () => {
    const zeros = new Array(20).fill(0);
    expect(() => whitenessTest({ innovations: [1, 2, 3], dimension: 1 })).toThrow("8 or more innovations");
    expect(() => whitenessTest({ innovations: run(random(1).normal, 15, 1), dimension: 2 })).toThrow(ArgumentError);
    expect(() => whitenessTest({ innovations: zeros, dimension: 1 })).toThrow("all zero");
    expect(() => whitenessTest({ innovations: [...zeros, 1], dimension: 1 }, { lags: 6 })).toThrow("lags = 6");
  });
});
