import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { cheapestAssignment } from "../../src/decide/associate/assignment.js";
import { bestAssignment } from "../../src/decide/associate/best-assignment.js";
import { jointCompatibility } from "../../src/decide/associate/joint-compatibility.js";
import { chiSquare } from "../../src/decide/distributions.js";
import { ArgumentError, CovarianceError, LevelError } from "../../src/decide/errors.js";
import { covarianceOf, deviationFromRate, draw } from "./monte-carlo.js";

describe("cheapest assignment", () => {
  const byTrial = (costs: number[][], row = 0, used: number[] = []): number =>
    row === costs.length
      ? 0
      : costs[row]!.reduce(
          (best, cost, j) => (used.includes(j) ? best : Math.min(best, cost + byTrial(costs, row + 1, [...used, j]))),
          Infinity,
        );

  test("is the least of all assignments, tried one by one", () => {
    const cost = fc.oneof({ weight: 5, arbitrary: fc.integer({ min: -20, max: 20 }) }, { weight: 1, arbitrary: fc.constant(Infinity) });
    const table = fc
      .tuple(fc.integer({ min: 1, max: 5 }), fc.integer({ min: 0, max: 2 }))
      .chain(([rows, more]) =>
        fc.array(fc.array(cost, { minLength: rows + more, maxLength: rows + more }), { minLength: rows, maxLength: rows }),
      );
    fc.assert(
      fc.property(table, (costs) => {
        const columns = costs[0]!.length;
        const flat = Float64Array.from(costs.flat());
        const least = byTrial(costs);
        if (least === Infinity) expect(() => cheapestAssignment(flat, costs.length, columns)).toThrow("no assignment avoids");
        else {
          const { columnOf, cost: found } = cheapestAssignment(flat, costs.length, columns);
          expect(found).toBe(least);
          expect(new Set(columnOf).size).toBe(costs.length);
        }
      }),
      { numRuns: 500 },
    );
  });

  test("sixty rows whose best columns are known beforehand", () => {
    const place = (i: number) => (i * 37) % 60;
    const costs = Float64Array.from({ length: 3600 }, (_, k) => (place(Math.floor(k / 60)) - (k % 60)) ** 2);
    const { columnOf, cost } = cheapestAssignment(costs, 60, 60);
    expect(cost).toBe(0);
    expect([...columnOf]).toEqual(Array.from({ length: 60 }, (_, i) => place(i)));
  });

  test("bad input is named", () => {
    expect(() => cheapestAssignment(Float64Array.of(1, 2), 2, 1)).toThrow("rows = 2");
    expect(() => cheapestAssignment(Float64Array.of(1), 1, 2)).toThrow(ArgumentError);
    expect(() => cheapestAssignment(Float64Array.of(1, Number.NaN), 1, 2)).toThrow("costs[1] = NaN");
    expect(cheapestAssignment(new Float64Array(0), 0, 3).cost).toBe(0);
  });
});

/** Targets on a line, all sighted from one place that is itself uncertain: every innovation shares that error. */
function scene(targets: number[], sightings: number[], shared: number, own: number) {
  const pairings = sightings.flatMap((at, sighting) => targets.map((to, target) => ({ sighting, target, innovation: [at - to] })));
  const covariance = (a: number, b: number) => [shared ** 2 + (pairings[a]!.sighting === pairings[b]!.sighting ? own ** 2 : 0)];
  return { pairings, covariance };
}
const matches = (pairings: { sighting: number; target: number }[], accepted: readonly number[]) =>
  accepted.map((k) => [pairings[k]!.sighting, pairings[k]!.target]);

describe("joint compatibility", () => {
  test("refuses a match that each sighting's own gate would have taken", () => {
    // The place is uncertain by 1, a sighting by 0.05, and the place is really off by +1: all sightings shift together. The third sighting, of
    // a target not on the map, lies 0.1 from target 2, nearer than the shift, so alone it looks best of all.
    const { pairings, covariance } = scene([0, 10, 20], [1, 11, 20.1], 1, 0.05);
    const alone = (k: number) => pairings[k]!.innovation[0]! ** 2 / covariance(k, k)[0]!;
    const third = pairings.findIndex(({ sighting, target }) => sighting === 2 && target === 2);
    expect(alone(third)).toBeLessThan(chiSquare(1).isf(0.05));
    const of = jointCompatibility(pairings, 3, covariance);
    expect(matches(pairings, of.accepted)).toEqual([
      [0, 0],
      [1, 1],
    ]);
    expect(of).toMatchObject({ verdict: "settled", unmatched: [2], degreesOfFreedom: [2] });
    expect(of.because).toContain("1 more had a candidate that would pass alone but not beside the others");
    expect(
      matches(
        pairings,
        bestAssignment(
          pairings.map((p, k) => ({ ...p, covariance: covariance(k, k) })),
          3,
          { level: 0.05 },
        ).accepted,
      ),
    ).toContainEqual([2, 2]);
  });

  /** Every set of pairings, grown in the same order (sightings with few candidates first), each part compatible; most matches, then least d². */
  const byTrial = ({ pairings, covariance }: ReturnType<typeof scene>, level: number) => {
    const squares = (chosen: number[]) => {
      // Gauss elimination of [S | ν]
      const s = chosen.map((a) => [...chosen.map((b) => covariance(a, b)[0]!), pairings[a]!.innovation[0]!]);
      let sum = 0;
      for (let k = 0; k < s.length; ++k) {
        sum += s[k]!.at(-1)! ** 2 / s[k]![k]!;
        for (let i = k + 1; i < s.length; ++i) {
          const factor = s[i]![k]! / s[k]![k]!;
          for (let j = k; j < s[i]!.length; ++j) s[i]![j]! -= factor * s[k]![j]!;
        }
      }
      return sum;
    };
    const alone = pairings.map((_, k) => k).filter((k) => squares([k]) <= chiSquare(1).isf(level));
    const candidates = (k: number) => alone.filter((other) => pairings[other]!.sighting === pairings[k]!.sighting).length;
    const order = alone.sort((a, b) => candidates(a) - candidates(b) || pairings[a]!.sighting - pairings[b]!.sighting);
    let best = { count: 0, squares: Infinity };
    const extend = (from: number, chosen: number[]): void => {
      const d2 = squares(chosen);
      if (chosen.length > 0 && d2 > chiSquare(chosen.length).isf(level)) return;
      if (chosen.length > best.count || (chosen.length === best.count && d2 < best.squares)) best = { count: chosen.length, squares: d2 };
      for (let at = from; at < order.length; ++at) {
        const k = order[at]!;
        const clash = chosen.some((c) => pairings[c]!.sighting === pairings[k]!.sighting || pairings[c]!.target === pairings[k]!.target);
        if (!clash) extend(at + 1, [...chosen, k]);
      }
    };
    extend(0, []);
    return best;
  };

  test("on small scenes it is the best of all sets, tried one by one", () => {
    const { uniform, normal } = random(31);
    for (let trial = 0; trial < 150; ++trial) {
      const targets = Array.from({ length: 4 }, () => 3 * uniform());
      const shift = normal();
      const sightings = targets.slice(0, 3).map((at) => at + shift + 0.2 * normal());
      sightings.push(3 * uniform());
      const of = scene(targets, sightings, 1, 0.2);
      const found = jointCompatibility(of.pairings, 4, of.covariance, { level: 0.1 });
      const best = byTrial(of, 0.1);
      expect(found.verdict).toBe("settled");
      expect(found.accepted.length).toBe(best.count);
      if (best.count > 0) expect(found.statistic).toBeCloseTo(best.squares, 8);
    }
  });

  test("sightings of two components with correlated errors: the right map of 25 targets is found among all 625 pairings", () => {
    const { normal, uniform } = random(77);
    const targets = Array.from({ length: 25 }, () => [20 * uniform(), 20 * uniform()] as const);
    const shift = [0.4 * normal(), 0.4 * normal()] as const;
    const order = targets.map((_, k) => (k * 7) % 25);
    const sightings = order.map((k) => [targets[k]![0] + shift[0] + 0.02 * normal(), targets[k]![1] + shift[1] + 0.02 * normal()] as const);
    const pairings = sightings.flatMap(([x, y], sighting) =>
      targets.map(([u, v], target) => ({ sighting, target, innovation: [x - u, y - v] })),
    );
    const covariance = (a: number, b: number) => {
      const variance = 0.16 + (pairings[a]!.sighting === pairings[b]!.sighting ? 0.0004 : 0);
      return [variance, 0, 0, variance];
    };
    const of = jointCompatibility(pairings, 25, covariance, { level: 0.001 });
    expect(of.verdict).toBe("settled");
    expect(matches(pairings, of.accepted)).toEqual(order.map((k, sighting) => [sighting, k]));
    // individual gates alone are in doubt about several: the gate's radius is √13.8 · 0.4 = 1.5
    const inDoubt = sightings.filter(([x, y]) => targets.filter(([u, v]) => (x - u) ** 2 + (y - v) ** 2 < 13.8 * 0.16).length > 1);
    expect(inDoubt.length).toBeGreaterThan(3);
  });

  test("the joint statistic of a right hypothesis follows χ², 2 000 seeded draws", () => {
    // one shared error and three of their own; at a level of 1e−12 nothing is refused and the statistic is that of all three
    const factor = [
      [1, 0.3, 0, 0],
      [1, 0, 0.3, 0],
      [1, 0, 0, 0.3],
      [0, 0, 0, 0],
    ];
    const joint = covarianceOf(factor);
    const beyond = (normal: () => number) => {
      const e = draw(factor, normal);
      const pairings = [0, 1, 2].map((k) => ({ sighting: k, target: k, innovation: [e[k]!] }));
      const { statistic, accepted } = jointCompatibility(pairings, 3, (a, b) => [joint[a]![b]!], { level: 1e-12 });
      expect(accepted).toEqual([0, 1, 2]);
      return statistic > chiSquare(3).isf(0.05);
    };
    expect(deviationFromRate(19, 0.05, beyond)).toBeLessThanOrEqual(1);
  });

  test("at its work limit it says so, and what it returns is compatible", () => {
    const { uniform } = random(3);
    const crowd = Array.from({ length: 12 }, () => uniform());
    const { pairings, covariance } = scene(
      crowd,
      Array.from({ length: 12 }, () => uniform()),
      1,
      0.1,
    );
    const of = jointCompatibility(pairings, 12, covariance, { workLimit: 50 });
    expect(of).toMatchObject({ verdict: "not settled", work: 50 });
    expect(of.because).toContain("Raise workLimit");
    expect(of.statistic).toBeLessThanOrEqual(of.threshold);
    expect(new Set(of.accepted.map((k) => pairings[k]!.target)).size).toBe(of.accepted.length);
  });

  test("nothing to match, and bad input", () => {
    expect(jointCompatibility([], 2, () => [1])).toMatchObject({ accepted: [], unmatched: [0, 1], verdict: "settled", statistic: 0 });
    const one = [{ sighting: 0, target: 0, innovation: [1] }];
    const one1 = [...one, { sighting: 1, target: 1, innovation: [1] }];
    expect(() => jointCompatibility(one, 1, () => [1], { level: 1 })).toThrow(LevelError);
    expect(() => jointCompatibility(one, 1, () => [1], { workLimit: 0 })).toThrow("workLimit = 0");
    expect(() => jointCompatibility(one, 0, () => [1])).toThrow("pairings[0].sighting = 0");
    expect(() => jointCompatibility(one, 1, () => [1, 2])).toThrow("has 2 entries: give 1 × 1");
    expect(() => jointCompatibility(one1, 2, () => [1])).toThrow(CovarianceError);
    expect(() => jointCompatibility([{ ...one[0]!, target: -1 }], 1, () => [1])).toThrow("pairings[0].target = -1");
  });
});

describe("best assignment", () => {
  const pairing = (sighting: number, target: number, nu: number, variance = 1) => ({
    sighting,
    target,
    innovation: [nu],
    covariance: [variance],
  });

  test("gives up a nearest target so that both sightings have one", () => {
    // sighting 0 is nearest to target 0, but so is sighting 1, and that one has no other
    const of = bestAssignment([pairing(0, 0, 0.5), pairing(0, 1, 1), pairing(1, 0, 2)], 3);
    expect(of.accepted).toEqual([1, 2]);
    expect(of.unmatched).toEqual([2]);
    expect(of.statistic).toBeCloseTo(5, 14);
  });

  test("of two targets equally far in standard deviations the more precise one is the likelier", () => {
    expect(bestAssignment([pairing(0, 0, 2, 4), pairing(0, 1, 1, 1)], 1).accepted).toEqual([1]);
  });

  test("outside the gate nothing matches, and bad input is named", () => {
    expect(bestAssignment([pairing(0, 0, 5)], 1)).toMatchObject({ accepted: [], unmatched: [0] });
    expect(bestAssignment([], 0).accepted).toEqual([]);
    expect(() => bestAssignment([pairing(0, 0, 1), pairing(0, 0, 1)], 1)).toThrow("it is there twice");
    expect(() => bestAssignment([pairing(0, 0, 1, -1)], 1)).toThrow("pairings[0].covariance");
    expect(() => bestAssignment([pairing(0, 0, 1)], 1, { level: 7 })).toThrow(LevelError);
  });
});
