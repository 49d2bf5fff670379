import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { type CholeskyFactor, factorize, factorizeAsync, memoryUsage, SymmetricMatrix } from "../../src/index.js";
import { errorOf, initFacade, randomDominant } from "../support/facade.js";

/** Work for some hundred milliseconds: many slices. */
const large = gridLaplacian(300);
beforeAll(initFacade);

/** The 5-point Laplacian of a square grid with all sides held: 4 on the diagonal, −1 to the neighbours. */
function gridLaplacian(side: number): SymmetricMatrix {
  const rows: number[] = [];
  const columns: number[] = [];
  const values: number[] = [];
  const add = (i: number, j: number, value: number) => {
    rows.push(i);
    columns.push(j);
    values.push(value);
  };
  for (let k = 0; k < side * side; k += 1) {
    add(k, k, 4);
    if ((k + 1) % side !== 0) add(k + 1, k, -1);
    if (k + side < side * side) add(k + side, k, -1);
  }
  return SymmetricMatrix.fromTriplets(side * side, rows, columns, values);
}

/** Large arrays are compared by a plain loop: a matcher's report of millions of elements takes minutes. */
function expectSameBits(actual: Float64Array, expected: Float64Array): void {
  expect(actual.length).toBe(expected.length);
  expect(actual.findIndex((value, k) => !Object.is(value, expected[k]))).toBe(-1);
}

function expectFractions(fractions: readonly number[]): void {
  expect(fractions.length).toBeGreaterThan(0);
  for (const [k, fraction] of fractions.entries()) {
    expect(fraction).toBeGreaterThanOrEqual(k === 0 ? 0 : fractions[k - 1]!);
    expect(fraction).toBeLessThanOrEqual(1);
  }
  expect(fractions.at(-1)).toBe(1);
}

test("calls in slices give the same bits as calls at once, with progress that rises to 1, and let the event loop turn", async () => {
  const small = randomDominant(300, 3, random(2).uniform);
  for (const matrix of [small, large]) {
    let turns = 0;
    const timer = setInterval(() => {
      turns += 1;
    }, 0);
    const fractions: Record<string, number[]> = { factorize: [], diagonal: [], selected: [], solve: [] };
    const onProgress = (name: string) => (fraction: number) => void fractions[name]!.push(fraction);
    const sliced = await factorizeAsync(matrix, { onProgress: onProgress("factorize") });
    const whole = factorize(matrix);
    const columns = matrix === small ? 18 : 2; // two groups, or one
    const rhs = Float64Array.from({ length: columns * matrix.order }, (_, k) => Math.cos(k));
    expectSameBits(await sliced.solveAsync(rhs, columns, { onProgress: onProgress("solve") }), whole.solve(rhs, columns));
    expectSameBits(await sliced.inverseDiagonalAsync({ onProgress: onProgress("diagonal") }), whole.inverseDiagonal());
    const selected = await sliced.selectedInverseAsync({ onProgress: onProgress("selected") });
    expectSameBits(selected.values, whole.selectedInverse().values);
    clearInterval(timer);
    for (const seen of Object.values(fractions)) expectFractions(seen);
    if (matrix === large) {
      expect(fractions.factorize!.length).toBeGreaterThan(3);
      expect(turns).toBeGreaterThan(0);
    }
    sliced.dispose();
    whole.dispose();
  }
});

test("an abort stops at the next slice, rejects with the signal's reason, and keeps no memory", async () => {
  const { used } = memoryUsage();
  const expectAborted = async (start: (options: { signal: AbortSignal; onProgress: () => void }) => Promise<unknown>) => {
    for (const slicesBefore of [0, 1, 3]) {
      const before = memoryUsage().used;
      const controller = new AbortController();
      const reason = new Error("the page was left");
      let slices = 0;
      const onProgress = () => {
        slices += 1;
        if (slices === slicesBefore) controller.abort(reason);
      };
      if (slicesBefore === 0) controller.abort(reason);
      expect(await errorOf(() => start({ signal: controller.signal, onProgress }))).toBe(reason);
      expect(slices).toBe(slicesBefore);
      expect(memoryUsage().used).toBe(before);
    }
  };
  await expectAborted((options) => factorizeAsync(large, options));
  const factor = factorize(large);
  await expectAborted((options) => factor.selectedInverseAsync(options));
  await expectAborted((options) => factor.solveAsync(new Float64Array(40 * large.order), 40, options));
  factor.refactor(large);
  factor.dispose();
  expect(memoryUsage().used).toBe(used);
});

test("a progress listener that throws stops the work and keeps no memory", async () => {
  const { used } = memoryUsage();
  const fault = new Error("listener");
  const onProgress = () => {
    throw fault;
  };
  expect(await errorOf(() => factorizeAsync(large, { onProgress }))).toBe(fault);
  expect(memoryUsage().used).toBe(used);
});

test("two factorizations at once do not disturb each other, and changing the input in between changes nothing", async () => {
  const first = gridLaplacian(60);
  const second = gridLaplacian(61);
  const expected = [first, second].map((matrix) => {
    const factor = factorize(matrix);
    const diagonal = factor.inverseDiagonal();
    factor.dispose();
    return diagonal;
  });
  const running = [factorizeAsync(first), factorizeAsync(second)];
  first.values.fill(Number.NaN);
  const factors: CholeskyFactor[] = await Promise.all(running);
  expect(await Promise.all(factors.map((factor) => factor.inverseDiagonalAsync()))).toEqual(expected);
  for (const factor of factors) factor.dispose();
});
