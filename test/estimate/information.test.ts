// Summing up the information matrix in the kernel: against dense JᵀJ, and in slices with the same bits.
import fc from "fast-check";
import { Matrix } from "ml-matrix";
import { beforeAll, describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { copyFloats, copyInts } from "../../bindings/memory.js";
import { assembleInformation, assemblySteps } from "../../src/estimate/information.js";
import type { WhitenedRows } from "../../src/estimate/whitened.js";
import { memoryUsage } from "../../src/index.js";
import { initFacade } from "../support/facade.js";
import { refusedUntilThereIsRoom } from "../support/refused.js";

beforeAll(initFacade);

/** States of 1 to 4 unknowns, measurements of 1 to 5 rows on up to four of them, with ids that are not their places. */
function network(seed: number, states: number, measurements: number) {
  const r = random(seed);
  const sizes = Int32Array.from({ length: states }, () => 1 + r.below(4));
  const rows: WhitenedRows[] = Array.from({ length: measurements }, () => {
    const read = new Set<number>();
    for (let k = 1 + r.below(Math.min(4, states)); k > 0; k -= 1) read.add(r.below(states));
    const places = [...read];
    const m = 1 + r.below(5);
    return {
      states: places.map((place) => 100 - place),
      rows: m,
      blocks: places.map((place) => Float64Array.from({ length: m * sizes[place]! }, () => r.normal())),
      residual: Float64Array.from({ length: m }, () => r.normal()),
    };
  });
  return { sizes, rows };
}
const place = (state: number): number => 100 - state;

function dense(sizes: Int32Array, rows: readonly WhitenedRows[]) {
  const first = [0];
  for (const size of sizes) first.push(first.at(-1)! + size);
  const n = first.at(-1)!;
  const m = rows.reduce((sum, r) => sum + r.rows, 0);
  const jacobian = Matrix.zeros(m, n);
  const residual = Matrix.zeros(m, 1);
  let top = 0;
  for (const { states, blocks, rows: count, residual: part } of rows) {
    states.forEach((state, k) => {
      blocks[k]!.forEach((value, p) => {
        jacobian.set(top + (p % count), first[place(state)]! + Math.floor(p / count), value);
      });
    });
    part.forEach((value, q) => {
      residual.set(top + q, 0, value);
    });
    top += count;
  }
  return { information: jacobian.transpose().mmul(jacobian), vector: jacobian.transpose().mmul(residual) };
}

describe("the information matrix of rows", () => {
  test("is JᵀJ and Jᵀr, with whole blocks, rows ascending and the diagonal first", () => {
    const shapes = fc.record({ seed: fc.nat(), states: fc.integer({ min: 1, max: 12 }), measurements: fc.integer({ min: 0, max: 30 }) });
    fc.assert(
      fc.property(shapes, ({ seed, states, measurements }) => {
        const { sizes, rows } = network(seed, states, measurements);
        const { order, columnPointers, rowIndices, values, vector } = assembleInformation(sizes, place, rows);
        const expected = dense(sizes, rows);
        expect(order).toBe(expected.information.rows);
        const left = expected.information.clone();
        for (let j = 0; j < order; j += 1) {
          expect(rowIndices[columnPointers[j]!]).toBe(j);
          for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
            const i = rowIndices[p]!;
            if (p > columnPointers[j]!) expect(i).toBeGreaterThan(rowIndices[p - 1]!);
            expect(Math.abs(values[p]! - expected.information.get(i, j))).toBeLessThan(1e-13 * (1 + expected.information.norm("max")));
            left.set(i, j, 0);
            left.set(j, i, 0);
          }
          expect(Math.abs(vector[j]! - expected.vector.get(j, 0))).toBeLessThan(1e-12 * (1 + expected.vector.norm("max")));
        }
        expect(left.norm("max")).toBe(0); // no entry was left out
      }),
      { numRuns: 60 },
    );
  });

  test("in the smallest slices has the same bits", () => {
    const { sizes, rows } = network(7, 40, 150);
    const whole = assembleInformation(sizes, place, rows);
    const steps = assemblySteps(sizes, place, rows, false);
    let slices = 0;
    let progress = 0;
    let step = steps.next(0);
    while (!step.done) {
      const result = step.value.advance(1);
      slices += 1;
      const share = (step.value.from ?? 0) + ((step.value.to ?? 1) - (step.value.from ?? 0)) * step.value.progress();
      expect(share).toBeGreaterThanOrEqual(progress - 1e-12);
      progress = share;
      if (result !== -1) step = steps.next(result);
    }
    const made = step.value;
    expect(slices).toBeGreaterThan(300);
    expect(copyInts(made.columnPointers, made.order + 1)).toEqual(whole.columnPointers);
    expect(copyFloats(made.values, whole.values.length)).toEqual(whole.values);
    expect(copyFloats(made.vector, made.order)).toEqual(whole.vector);
    made.giveBack();
  });

  test("is refused wherever memory runs out, and nothing is held then", () => {
    const { sizes, rows } = network(3, 60, 400);
    const { used } = memoryUsage();
    expect(refusedUntilThereIsRoom(() => assembleInformation(sizes, place, rows), 4000)).toBeGreaterThan(5);
    expect(memoryUsage().used).toBe(used);
  });
});
