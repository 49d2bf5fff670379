import fc from "fast-check";
import { inverse, Matrix } from "ml-matrix";
import { beforeAll, describe, expect, test } from "vitest";
import { net } from "../../bench/families/net.js";
import { patrol } from "../../bench/families/patrol.js";
import type { Stream } from "../../bench/families/stream.js";
import { absorb } from "../../src/estimate/absorb.js";
import { condense } from "../../src/estimate/condense.js";
import { whiten } from "../../src/estimate/rows.js";
import type { WhitenedRows } from "../../src/estimate/whitened.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

interface Network {
  states: number[];
  rows: WhitenedRows[];
  dimensionOf: (state: number) => number;
}
const networkOf = (stream: Stream): Network => {
  const dimensionOf = (state: number): number => stream.dimension(state);
  return {
    states: Array.from({ length: stream.states }, (_, s) => s),
    rows: Array.from({ length: stream.measurements }, (_, k) => whiten(stream.measurement(k), dimensionOf)),
    dimensionOf,
  };
};

/** Λ, η and rᵀr of some rows, dense, over the states in the order given. */
function denseSystem(rows: readonly WhitenedRows[], states: readonly number[], dimensionOf: (state: number) => number) {
  const first = new Map<number, number>();
  let order = 0;
  for (const state of states) {
    first.set(state, order);
    order += dimensionOf(state);
  }
  const information = new Matrix(order, order);
  const vector = new Matrix(order, 1);
  let squares = 0;
  for (const { states: read, blocks, rows: m, residual } of rows) {
    for (let q = 0; q < m; q += 1) {
      const entries = read.flatMap((s, k) =>
        Array.from({ length: dimensionOf(s) }, (_, u): [number, number] => [first.get(s)! + u, blocks[k]![u * m + q]!]),
      );
      for (const [i, a] of entries) {
        vector.set(i, 0, vector.get(i, 0) + a * residual[q]!);
        for (const [j, b] of entries) information.set(i, j, information.get(i, j) + a * b);
      }
      squares += residual[q]! ** 2;
    }
  }
  return { information, vector, squares };
}

/** Schur complement by a general library onto the first `kept` unknowns. */
function denseSchur({ information, vector, squares }: ReturnType<typeof denseSystem>, kept: number) {
  const n = information.rows;
  if (n === kept) return { information, vector, squares };
  const part = (a: number, b: number, c: number, d: number): Matrix => information.subMatrix(a, b - 1, c, d - 1);
  const coupling = part(0, kept, kept, n);
  const inner = inverse(part(kept, n, kept, n));
  const right = vector.subMatrix(kept, n - 1, 0, 0);
  return {
    information: Matrix.sub(part(0, kept, 0, kept), coupling.mmul(inner).mmul(coupling.transpose())),
    vector: Matrix.sub(vector.subMatrix(0, kept - 1, 0, 0), coupling.mmul(inner).mmul(right)),
    squares: squares - right.transpose().mmul(inner).mmul(right).get(0, 0),
  };
}

/** Largest difference over the largest entry. */
const distance = (a: ArrayLike<number>, b: Matrix): number => {
  const expected = b.to1DArray();
  const largest = expected.reduce((max, value) => Math.max(max, Math.abs(value)), 0);
  return expected.reduce((max, value, k) => Math.max(max, Math.abs(value - a[k]!)), 0) / largest;
};

describe("a network condensed to a few of its states", () => {
  test("equals the dense Schur complement, in the order asked for", () => {
    const { states, rows, dimensionOf } = networkOf(patrol(40, { side: 4, revisits: 0.28 }));
    for (const keep of [[7], [39, 2, 11], states]) {
      const order = [...keep, ...states.filter((s) => !keep.includes(s))];
      const kept = keep.reduce((sum, s) => sum + dimensionOf(s), 0);
      const expected = denseSchur(denseSystem(rows, order, dimensionOf), kept);
      const { information, vector } = condense(keep, states, rows, dimensionOf);
      // The complement keeps a share of about 1e-4 of the diagonal here (the variance of a pose given its neighbours over its variance), and
      // the condition of what is eliminated is below 1e6: n ε × both.
      const tolerance = 120 * Number.EPSILON * 1e4 * 1e2;
      expect(distance(information, expected.information)).toBeLessThan(tolerance);
      expect(distance(vector, expected.vector)).toBeLessThan(tolerance);
      for (let i = 0; i < kept; i += 1) for (let j = 0; j < i; j += 1) expect(information[i * kept + j]).toBe(information[j * kept + i]);
    }
  });

  test("two halves condensed to the states they share, joined, equal the whole (Helmert blocking; common practice, no source)", () => {
    const { states, rows, dimensionOf } = networkOf(net(120));
    // Halves by readings: every state that both read is shared.
    const half = Math.floor(rows.length / 2);
    const parts = [rows.slice(0, half), rows.slice(half)].map((own) => ({ own, read: new Set(own.flatMap((r) => r.states)) }));
    const shared = states.filter((s) => parts.every(({ read }) => read.has(s)));
    const [left, right] = parts.map(({ own, read }) => condense(shared, [...read], own, dimensionOf));
    const whole = condense(shared, states, rows, dimensionOf);
    const joined = left!.information.map((value, k) => value + right!.information[k]!);
    const size = 2 * shared.length;
    const matrix = new Matrix(Array.from({ length: size }, (_, i) => Array.from(whole.information.subarray(i * size, (i + 1) * size))));
    // As above.
    expect(distance(joined, matrix)).toBeLessThan(1e-9);
    expect(
      distance(
        left!.vector.map((value, k) => value + right!.vector[k]!),
        Matrix.columnVector(whole.vector),
      ),
    ).toBeLessThan(1e-9);
  });
});

const networks = fc.record({
  seed: fc.integer({ min: 1, max: 1e6 }),
  poses: fc.integer({ min: 4, max: 14 }),
  gone: fc.uniqueArray(fc.integer({ min: 0, max: 13 }), { minLength: 1, maxLength: 8 }),
  weight: fc.constantFrom(1, 1e-4, 1e4),
});

describe("states left out leave their information with their neighbours", () => {
  test("rows on the neighbours have the dense Schur complement as their information and vector, and the least squares stay as they were", () => {
    fc.assert(
      fc.property(networks, ({ seed, poses, gone, weight }) => {
        const stream = patrol(poses, { seed, side: 2, revisits: 0.5, priorScale: weight });
        const { states, rows, dimensionOf } = networkOf(stream);
        const out = gone.filter((s) => s < poses - 1);
        fc.pre(out.length > 0);
        const kept = states.filter((s) => !out.includes(s));
        const reading = rows.filter((r) => r.states.some((s) => out.includes(s)));
        const before = denseSystem(rows, [...kept, ...out], dimensionOf);
        const absorbed = absorb(out, reading, dimensionOf);
        for (const r of absorbed.rows) {
          expect(r.states.some((s) => out.includes(s))).toBe(false);
          expect(r.rows).toBeLessThanOrEqual(r.states.reduce((sum, s) => sum + dimensionOf(s), 0));
        }
        const rest = rows.filter((r) => !reading.includes(r));
        const after = denseSystem([...rest, ...absorbed.rows], kept, dimensionOf);
        const expected = denseSchur(before, 3 * kept.length);
        // The dense complement itself loses n ε × the condition of what it eliminates, up to 1e8 with the strongest prior.
        expect(distance(after.information.to1DArray(), expected.information)).toBeLessThan(42 * Number.EPSILON * 1e8);
        const solved = (s: typeof after): number => s.squares - s.vector.transpose().mmul(inverse(s.information)).mmul(s.vector).get(0, 0);
        expect(Math.abs(solved(after) + absorbed.squares - solved(before))).toBeLessThan(1e-6 * (1 + before.squares));
        const count = (list: readonly WhitenedRows[]): number => list.reduce((sum, r) => sum + r.rows, 0);
        // Degrees of freedom: rows less unknowns, before and after.
        expect(count(rest) + count(absorbed.rows) - 3 * kept.length + absorbed.redundancy).toBe(count(rows) - 3 * poses);
      }),
    );
  });

  test("a chain of 2 000 poses leaves rows on its two ends alone", () => {
    const { states, rows, dimensionOf } = networkOf(patrol(2000, { side: 3000, revisits: 0 }));
    const { rows: left, redundancy } = absorb(states.slice(1, -1), rows.slice(1), dimensionOf);
    expect(left.map((r) => [...r.states].sort((a, b) => a - b))).toEqual([[0, 1999]]);
    expect(left[0]!.rows).toBe(3);
    expect(redundancy).toBe(0);
  });

  test("a state that no row determines takes nothing along", () => {
    const dimensionOf = (): number => 1;
    const tie = whiten({ states: [0, 1], jacobians: [[[0]], [[2]]], residual: [3], standardDeviations: [1] }, dimensionOf);
    const { rows, redundancy, squares } = absorb([0], [tie], dimensionOf);
    expect(rows.map((r) => r.states)).toEqual([[1]]);
    const { information, vector } = denseSystem(rows, [1], dimensionOf);
    expect([information.get(0, 0), vector.get(0, 0), redundancy, squares]).toEqual([4, 6, 0, 0]);
  });
});
