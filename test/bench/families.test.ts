import { Matrix } from "ml-matrix";
import { describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { grid } from "../../bench/families/grid.js";
import { information } from "../../bench/families/information.js";
import { patrol } from "../../bench/families/patrol.js";
import { type PlanarPose, pointFromPose, relativePlanarPose, relativeSpatialPose, type SpatialPose } from "../../bench/families/poses.js";
import { random, xoshiro128 } from "../../bench/families/random.js";
import type { Stream } from "../../bench/families/stream.js";
import { type FamilyName, families } from "../../bench/families.js";
import { denseOf, isPositiveDefinite } from "../support/dense.js";

const names = Object.keys(families) as FamilyName[];

/** Σ Jᵀ R⁻¹ J and Σ Jᵀ R⁻¹ r by dense products of the whole design matrix. */
function byDesignMatrix(stream: Stream): { matrix: Matrix; vector: Matrix } {
  const start = [0];
  for (let s = 0; s < stream.states; s += 1) start.push(start[s]! + stream.dimension(s));
  const rows: number[][] = [];
  const right: number[][] = [];
  for (let k = 0; k < stream.measurements; k += 1) {
    const { states, jacobians, residual, standardDeviations } = stream.measurement(k);
    for (const [r, deviation] of standardDeviations.entries()) {
      const row = new Array<number>(start.at(-1)!).fill(0);
      for (const [u, state] of states.entries())
        for (let c = 0; c < stream.dimension(state); c += 1)
          row[start[state]! + c]! += jacobians[u]![r * stream.dimension(state) + c]! / deviation;
      rows.push(row);
      right.push([residual[r]! / deviation]);
    }
  }
  const design = new Matrix(rows);
  return { matrix: design.transpose().mmul(design), vector: design.transpose().mmul(new Matrix(right)) };
}

test("the generator gives the reference numbers of xoshiro128** from the state 1, 2, 3, 4 (by hand, from the definition)", () => {
  const next = xoshiro128([1, 2, 3, 4]);
  // The second word of the state is 2, then 0, then 1029, and each output is 9 · rotl(5 · word, 7): 9 · 128 · 10, 0, 9 · 128 · 5145.
  expect([next(), next(), next()]).toEqual([11520, 0, 5927040]);
});

test("normal draws have mean 0, variance 1 and kurtosis 3 within five standard errors of 100 000", () => {
  const r = random(7);
  const n = 100_000;
  let [sum, square, fourth] = [0, 0, 0];
  for (let k = 0; k < n; k += 1) {
    const z = r.normal();
    sum += z;
    square += z * z;
    fourth += z ** 4;
  }
  // Standard errors 1/√n, √2/√n, √96/√n: variances of z, z², z⁴ are 1, 2, 96.
  expect(Math.abs(sum / n)).toBeLessThan(5 / Math.sqrt(n));
  expect(Math.abs(square / n - 1)).toBeLessThan((5 * Math.sqrt(2)) / Math.sqrt(n));
  expect(Math.abs(fourth / n - 3)).toBeLessThan((5 * Math.sqrt(96)) / Math.sqrt(n));
});

describe.each(names)("%s", (name) => {
  test.each([2, 3, 13, 40])("the information of %i states is the product of the design matrix, and positive definite", (states) => {
    const stream = families[name].make(states, 5);
    const found = information(stream);
    const { matrix, vector } = byDesignMatrix(stream);
    const full = denseOf(found);
    // Sums of at most a few hundred products in two orders.
    const scale = matrix.max() * 1e-13;
    expect(Matrix.sub(full, matrix).abs().max()).toBeLessThanOrEqual(scale);
    const vectorScale = vector.clone().abs().max() * 1e-11;
    for (let i = 0; i < found.order; i += 1) expect(Math.abs(found.vector[i]! - vector.get(i, 0))).toBeLessThanOrEqual(vectorScale);
    expect(isPositiveDefinite(full)).toBe(true);
    expect(found.blockSizes.reduce((sum, d) => sum + d, 0)).toBe(found.order);
    for (let j = 0; j < found.order; j += 1) {
      const rows = found.rowIndices.subarray(found.columnPointers[j], found.columnPointers[j + 1]);
      expect(rows[0]).toBe(j);
      for (let p = 1; p < rows.length; p += 1) expect(rows[p]!).toBeGreaterThan(rows[p - 1]!);
    }
  });

  test("each step leaves a determined system, reads only states that have arrived, and a repeat gives the same numbers", () => {
    const stream = families[name].make(30, 3);
    const again = families[name].make(30, 3);
    for (let s = 0; s < stream.steps; s += 1) {
      const step = stream.step(s);
      for (let k = step.firstMeasurement; k < step.lastMeasurement; k += 1) {
        const measurement = stream.measurement(k);
        expect(Math.max(...measurement.states)).toBeLessThan(step.lastState);
        expect(new Set(measurement.states).size).toBe(measurement.states.length);
        expect(again.measurement(k)).toEqual(measurement);
      }
      expect(isPositiveDefinite(denseOf(information(stream, s + 1)))).toBe(true);
    }
    const last = stream.step(stream.steps - 1);
    expect([last.lastState, last.lastMeasurement]).toEqual([stream.states, stream.measurements]);
    expect(stream.states).toBeGreaterThanOrEqual(name === "landmarks" ? 20 : 30);
  });
});

test("the grid is the five-point Laplacian with fixed borders", () => {
  const matrix = denseOf(information(grid(3, 4)));
  for (let a = 0; a < 12; a += 1) {
    for (let b = 0; b < 12; b += 1) {
      const apart = Math.abs(Math.floor(a / 4) - Math.floor(b / 4)) + Math.abs((a % 4) - (b % 4));
      expect(matrix.get(a, b)).toBe(apart === 0 ? 4 : apart === 1 ? -1 : 0);
    }
  }
});

test("28 % of the heavy patrol's steps and 5.5 % of the light one's tie the new pose to an earlier spot", () => {
  for (const [name, share] of [
    ["heavy", 0.28],
    ["patrol", 0.055],
  ] as const) {
    const stream = families[name].make(2000);
    expect((stream.measurements - stream.states) / stream.states).toBeCloseTo(share, 2);
  }
  expect(patrol(100, { side: 3, revisits: 0 }).measurements).toBe(100);
  expect(chain(100, { fixEvery: 0 }).measurements).toBe(100);
});

describe("the pose measurements' Jacobians equal central differences of their predictions", () => {
  const h = 1e-6;
  // Truncation h² and cancellation ε/h, each about 1e-10 here for predictions of size 10.
  const tolerance = 1e-8;
  const compare = (block: number[], rows: number, columns: number, predict: (k: number, by: number) => number[]): void => {
    for (let c = 0; c < columns; c += 1) {
      const [up, down] = [predict(c, h), predict(c, -h)];
      for (let r = 0; r < rows; r += 1) expect(Math.abs(block[r * columns + c]! - (up[r]! - down[r]!) / (2 * h))).toBeLessThan(tolerance);
    }
  };
  const planar = (a: PlanarPose, b: PlanarPose): number[] => {
    const [c, s] = [Math.cos(a.heading), Math.sin(a.heading)];
    const [dx, dy] = [b.x - a.x, b.y - a.y];
    return [c * dx + s * dy, -s * dx + c * dy, b.heading - a.heading];
  };
  const moved = (p: PlanarPose, k: number, by: number): PlanarPose => ({
    x: p.x + (k === 0 ? by : 0),
    y: p.y + (k === 1 ? by : 0),
    heading: p.heading + (k === 2 ? by : 0),
  });
  const [a, b]: [PlanarPose, PlanarPose] = [
    { x: 1, y: -2, heading: 0.7 },
    { x: 4, y: 3, heading: -1.1 },
  ];

  test("planar poses and points", () => {
    const [onA, onB] = relativePlanarPose(a, b);
    compare(onA, 3, 3, (k, by) => planar(moved(a, k, by), b));
    compare(onB, 3, 3, (k, by) => planar(a, moved(b, k, by)));
    const [onPose, onPoint] = pointFromPose(a, b);
    compare(onPose, 2, 3, (k, by) => planar(moved(a, k, by), b));
    compare(onPoint, 2, 2, (k, by) => planar(a, moved(b, k, by)));
  });

  test("spatial poses: shift and small turn of the relative pose, in the axes of the second", () => {
    const turn = (axis: number, angle: number): number[] => {
      const [c, s] = [Math.cos(angle), Math.sin(angle)];
      return [
        [1, 0, 0, 0, c, -s, 0, s, c],
        [c, 0, s, 0, 1, 0, -s, 0, c],
        [c, -s, 0, s, c, 0, 0, 0, 1],
      ][axis]!;
    };
    const times = (p: readonly number[], q: readonly number[]): number[] =>
      Array.from({ length: 9 }, (_, k) => [0, 1, 2].reduce((sum, m) => sum + p[3 * Math.floor(k / 3) + m]! * q[3 * m + (k % 3)]!, 0));
    const transposed = (p: readonly number[]): number[] => Array.from({ length: 9 }, (_, k) => p[3 * (k % 3) + Math.floor(k / 3)]!);
    const apply = (p: readonly number[], v: readonly number[]): number[] =>
      [0, 1, 2].map((i) => [0, 1, 2].reduce((sum, k) => sum + p[3 * i + k]! * v[k]!, 0));
    const shift = (pose: SpatialPose, k: number, by: number): SpatialPose => {
      const along = apply(
        pose.axes,
        [0, 1, 2].map((m) => (k === m + 3 ? by : 0)),
      );
      return {
        place: [pose.place[0] + along[0]!, pose.place[1] + along[1]!, pose.place[2] + along[2]!],
        axes: k < 3 ? times(pose.axes, turn(k, by)) : pose.axes,
      };
    };
    const first: SpatialPose = { place: [1, 2, 3], axes: times(turn(0, 0.4), turn(1, -0.8)) };
    const second: SpatialPose = { place: [-2, 1, 5], axes: times(turn(2, 1.3), turn(0, 0.2)) };
    const relative = (p: SpatialPose, q: SpatialPose) => ({
      axes: times(transposed(p.axes), q.axes),
      place: apply(
        transposed(p.axes),
        q.place.map((v, k) => v - p.place[k]!),
      ),
    });
    const still = relative(first, second);
    const motion = (p: SpatialPose, q: SpatialPose): number[] => {
      const now = relative(p, q);
      const small = times(transposed(still.axes), now.axes);
      const moved = apply(
        transposed(still.axes),
        now.place.map((v, k) => v - still.place[k]!),
      );
      return [(small[7]! - small[5]!) / 2, (small[2]! - small[6]!) / 2, (small[3]! - small[1]!) / 2, ...moved];
    };
    const [onFirst, onSecond] = relativeSpatialPose(first, second);
    compare(onFirst, 6, 6, (k, by) => motion(shift(first, k, by), second));
    compare(onSecond, 6, 6, (k, by) => motion(first, shift(second, k, by)));
  });
});
