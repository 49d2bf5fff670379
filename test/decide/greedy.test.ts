import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { ArgumentError } from "../../src/decide/errors.js";
import { type GainOracle, selectGreedily } from "../../src/decide/greedy.js";
import { covarianceOf, randomFactor } from "./monte-carlo.js";

/** Information gain ½ ln(1 + aᵀ Σ a / σ²) of scalar readings, Σ corrected by each pick (Sherman, Morrison 1950). */
const information =
  (covariance: number[][], readings: number[][], noise = 0.5) =>
  (): GainOracle => {
    const sigma = covariance.map((row) => [...row]);
    const column = (a: number[]) => sigma.map((row) => row.reduce((sum, s, k) => sum + s * a[k]!, 0));
    const spread = (a: number[]) => column(a).reduce((sum, b, k) => sum + b * a[k]!, 0) / noise ** 2;
    return {
      gain: (c) => 0.5 * Math.log1p(spread(readings[c]!)),
      pick: (c) => {
        const b = column(readings[c]!);
        const scale = noise ** 2 * (1 + spread(readings[c]!));
        for (const [i, row] of sigma.entries()) for (const j of row.keys()) row[j]! -= (b[i]! * b[j]!) / scale;
      },
    };
  };
const problem = (seed: number, states: number, candidates: number) => {
  const { normal } = random(seed);
  return information(
    covarianceOf(randomFactor(states, normal)),
    Array.from({ length: candidates }, () => Array.from({ length: states }, normal)),
  );
};
const gainOf = (start: () => GainOracle, chosen: number[]) => {
  const oracle = start();
  return chosen.reduce((sum, c) => {
    const gain = oracle.gain(c);
    oracle.pick(c);
    return sum + gain;
  }, 0);
};
const subsets = (n: number): number[][] =>
  Array.from({ length: 2 ** n }, (_, bits) => Array.from({ length: n }, (_, k) => k).filter((k) => bits & (2 ** k)));

describe("equal costs", () => {
  test("is the plain greedy choice, with fewer gains asked for", () => {
    for (let seed = 1; seed <= 20; ++seed) {
      const start = problem(seed, 12, 200);
      const costs = new Array(200).fill(2);
      const lazy = selectGreedily(costs, start, { picks: 10 });
      const plain = selectGreedily(costs, start, { picks: 10, diminishing: false });
      expect(lazy.steps).toEqual(plain.steps);
      expect(plain.upperBound).toBe(Infinity);
      expect(plain.evaluations).toBe(200 + 199 + 198 + 197 + 196 + 195 + 194 + 193 + 192 + 191);
      expect(lazy.evaluations).toBeLessThan(plain.evaluations);
    }
  });

  test("gains add up to the joint gain in any order (chain rule), and never rise", () => {
    const start = problem(5, 8, 30);
    const { steps, totalGain, totalCost } = selectGreedily(new Array(30).fill(1), start, { picks: 6 });
    const backwards = steps.map(({ candidate }) => candidate).reverse();
    expect(gainOf(start, backwards)).toBeCloseTo(totalGain, 12);
    expect(totalCost).toBe(6);
    expect(steps.at(-1)).toMatchObject({ totalGain, totalCost });
    for (let k = 1; k < steps.length; ++k) expect(steps[k]!.gain).toBeLessThanOrEqual(steps[k - 1]!.gain + 1e-12);
  });

  test("reaches 1 − 1/e of the best of all choices, which its bound covers (Nemhauser, Wolsey, Fisher 1978)", () => {
    for (let seed = 1; seed <= 40; ++seed) {
      const start = problem(seed, 3 + (seed % 3), 9);
      const picks = 2 + (seed % 3);
      const best = Math.max(
        ...subsets(9)
          .filter((set) => set.length === picks)
          .map((set) => gainOf(start, set)),
      );
      const { totalGain, upperBound } = selectGreedily(new Array(9).fill(1), start, { picks });
      expect(totalGain).toBeGreaterThanOrEqual((1 - Math.exp(-1)) * best);
      expect(totalGain).toBeLessThanOrEqual(best + 1e-12);
      expect(upperBound).toBeGreaterThanOrEqual(best - 1e-12);
    }
  });
});

describe("unequal costs under a budget", () => {
  test("stays within the budget and its guarantee, (1 − 1/e) / 2 of the best, which its bound covers", () => {
    for (let seed = 1; seed <= 40; ++seed) {
      const { uniform } = random(seed + 100);
      const start = problem(seed, 4, 9);
      const costs = Array.from({ length: 9 }, () => 0.2 + 3 * uniform());
      const budget = 4;
      const price = (set: number[]) => set.reduce((sum, c) => sum + costs[c]!, 0);
      const best = Math.max(
        ...subsets(9)
          .filter((set) => price(set) <= budget)
          .map((set) => gainOf(start, set)),
      );
      const { steps, totalGain, totalCost, upperBound } = selectGreedily(costs, start, { budget });
      expect(totalCost).toBeLessThanOrEqual(budget);
      expect(totalCost).toBeCloseTo(price(steps.map(({ candidate }) => candidate)), 12);
      expect(totalGain).toBeGreaterThanOrEqual(((1 - Math.exp(-1)) / 2) * best);
      expect(upperBound).toBeGreaterThanOrEqual(best - 1e-12);
    }
  });

  test("one dear candidate that is worth all cheap ones is not missed", () => {
    // by gain for cost the cheap one comes first and leaves no room for the other
    const values = [2, 10];
    const start = (): GainOracle => ({ gain: (c) => values[c]!, pick: () => {} });
    expect(selectGreedily([1, 10], start, { budget: 10 }).steps.map(({ candidate }) => candidate)).toEqual([1]);
  });

  test("without a limit everything that gains is taken, best for its cost first", () => {
    const values = [1, 6, 0, 4];
    const start = (): GainOracle => ({ gain: (c) => values[c]!, pick: () => {} });
    const { steps, because } = selectGreedily([1, 3, 1, 1], start);
    expect(steps.map(({ candidate }) => candidate)).toEqual([3, 1, 0]);
    expect(because).toBe("3 of 4 candidates gain 11 for 5, the last of them 1; at least 100 % of what any choice could gain.");
  });
});

test("gains that can rise are chosen anew at every step", () => {
  // two readings that are worth nothing alone and much together, beside one of small worth
  const start = (): GainOracle => {
    const picked = new Set<number>();
    return { gain: (c) => (c === 0 ? 1 : picked.has(0) && c === 2 ? 5 : 0.5), pick: (c) => picked.add(c) };
  };
  expect(selectGreedily([1, 1, 1], start, { diminishing: false, picks: 2 }).steps.map(({ candidate }) => candidate)).toEqual([0, 2]);
});

test("bad input is named", () => {
  const start = (): GainOracle => ({ gain: () => 1, pick: () => {} });
  expect(() => selectGreedily([], start)).toThrow(ArgumentError);
  expect(() => selectGreedily([1, 0], start)).toThrow("costs[1] = 0");
  expect(() => selectGreedily([5, 7], start, { budget: 4 })).toThrow("the cheapest candidate costs 5");
  expect(() => selectGreedily([5], start, { budget: 0 })).toThrow("budget = 0");
  expect(() => selectGreedily([5], start, { picks: 0.5 })).toThrow("picks = 0.5");
  expect(() => selectGreedily([5], () => ({ gain: () => Number.NaN, pick: () => {} }))).toThrow("gain of candidate 0");
  const nothing = selectGreedily([5], () => ({ gain: () => 0, pick: () => {} }));
  expect(nothing).toMatchObject({ steps: [], totalGain: 0, because: "No candidate within the budget gains anything." });
});
