import { describe, expect, test } from "vitest";
import { chiSquare } from "../../src/decide/distributions.js";
import { ArgumentError, DegreesOfFreedomError, LevelError } from "../../src/decide/errors.js";
import { perTestLevel } from "../../src/decide/family-level.js";
import { varianceFactorTest } from "../../src/decide/variance-factor.js";
import { deviationFromRate } from "./monte-carlo.js";

test("ten surplus readings at 5 %: Ω between 3.247 and 20.483 is as stated", () => {
  // NIST/SEMATECH e-Handbook 1.3.6.7.4: lower 2.5 % point 3.247, upper 20.483
  const of = (weightedSquares: number) => varianceFactorTest({ weightedSquares, redundancy: 10 });
  expect(of(9)).toMatchObject({ verdict: "as stated", varianceFactor: 0.9, degreesOfFreedom: [10] });
  expect(Math.abs(of(9).lowerThreshold - 3.247)).toBeLessThanOrEqual(0.0005);
  expect(Math.abs(of(9).threshold - 20.483)).toBeLessThanOrEqual(0.0005);
  expect(of(20.48).verdict).toBe("as stated");
  expect(of(20.49).verdict).toBe("more than stated");
  expect(of(3.24).verdict).toBe("less than stated");
  expect(of(40).because).toContain("scatter 2 times as much");
  expect(of(40).because).toContain("blunder");
});

test("one-sided: only too much counts, and the whole level is above", () => {
  const one = varianceFactorTest({ weightedSquares: 0.1, redundancy: 10 }, { sides: "upper" });
  expect(one).toMatchObject({ verdict: "as stated", lowerThreshold: 0 });
  expect(Math.abs(one.threshold - 18.307)).toBeLessThanOrEqual(0.0005); // e-Handbook, 5 %
  expect(one.probability).toBe(chiSquare(10).sf(0.1));
});

test.each(["both", "upper"] as const)("right readings are called out at the level, %s, 2 000 seeded draws", (sides) => {
  const alarm = (normal: () => number) => {
    let weightedSquares = 0;
    for (let k = 0; k < 7; ++k) weightedSquares += normal() ** 2;
    return varianceFactorTest({ weightedSquares, redundancy: 7 }, { level: 0.1, sides }).verdict !== "as stated";
  };
  expect(deviationFromRate(3, 0.1, alarm)).toBeLessThanOrEqual(1);
});

test("bad input is named", () => {
  expect(() => varianceFactorTest({ weightedSquares: 1, redundancy: 0 })).toThrow(DegreesOfFreedomError);
  expect(() => varianceFactorTest({ weightedSquares: -1, redundancy: 3 })).toThrow("weightedSquares = -1");
  expect(() => varianceFactorTest({ weightedSquares: 1, redundancy: 3 }, { level: 1 })).toThrow(LevelError);
});

describe("the level of each of many tests", () => {
  test("Šidák makes independent tests one family, Bonferroni stays below", () => {
    for (const tests of [1, 2, 300, 1e6])
      for (const level of [1e-9, 0.05, 0.5]) {
        const each = perTestLevel(level, tests);
        expect(Math.abs(-Math.expm1(tests * Math.log1p(-each)) / level - 1)).toBeLessThanOrEqual(1e-14);
        expect(perTestLevel(level, tests, "bonferroni")).toBeLessThanOrEqual(each * (1 + 1e-15));
      }
  });
  test("bad input is named", () => {
    expect(() => perTestLevel(0.05, 0)).toThrow(ArgumentError);
    expect(() => perTestLevel(0.05, 2.5)).toThrow("tests = 2.5");
    expect(() => perTestLevel(1.5, 2)).toThrow(LevelError);
  });
});
