import { expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import {
  BusyError,
  type CholeskyFactor,
  DisposedError,
  factorize,
  memoryUsage,
  NotInitializedError,
  SymmetricMatrix,
} from "../../src/index.js";
import { errorOf, initFacade, randomDominant } from "../support/facade.js";

const matrix = randomDominant(120, 3, random(11).uniform);

test("before init: matrices can be made, read and written; all that needs the kernel throws NotInitializedError", async () => {
  expect(SymmetricMatrix.fromMatrixMarket(matrix.toMatrixMarket()).values).toEqual(matrix.values);
  for (const call of [() => factorize(matrix), () => memoryUsage()]) expect(call).toThrowError(NotInitializedError);
  await initFacade();
  factorize(matrix).dispose();
});

const methods: Record<string, (factor: CholeskyFactor) => unknown> = {
  solve: (factor) => factor.solve(new Float64Array(120)),
  solveAsync: (factor) => factor.solveAsync(new Float64Array(120)),
  inverseColumns: (factor) => factor.inverseColumns([]),
  inverseEntries: (factor) => factor.inverseEntries([], []),
  inverseBlock: (factor) => factor.inverseBlock([]),
  inverseDiagonal: (factor) => factor.inverseDiagonal(),
  "inverseDiagonal as squares": (factor) => factor.inverseDiagonal({ method: "squares" }),
  inverseDiagonalAsync: (factor) => factor.inverseDiagonalAsync(),
  selectedInverse: (factor) => factor.selectedInverse(),
  selectedInverseAsync: (factor) => factor.selectedInverseAsync({ pattern: "matrix" }),
  logDeterminant: (factor) => factor.logDeterminant(),
  reciprocalCondition: (factor) => factor.reciprocalCondition(),
  refactor: (factor) => factor.refactor(matrix),
};

test("after dispose every method throws DisposedError, disposing again is harmless, and results stay good", async () => {
  const { used } = memoryUsage();
  const factor = factorize(matrix);
  const results = [factor.solve(new Float64Array(120).fill(1)), factor.inverseDiagonal(), factor.selectedInverse().values];
  const copies = results.map((result) => result.slice());
  expect(factor.inverseDiagonal()).toEqual(copies[1]);
  factor.dispose();
  factor.dispose();
  factor[Symbol.dispose]();
  for (const [name, call] of Object.entries(methods)) expect(await errorOf(() => call(factor)), name).toBeInstanceOf(DisposedError);
  expect(memoryUsage().used).toBe(used);
  factorize(matrix).dispose();
  expect(results).toEqual(copies);
  expect(factor.statistics.order).toBe(120);
});

test("a caller who writes to a result changes that copy alone", () => {
  const factor = factorize(matrix);
  const diagonal = factor.inverseDiagonal();
  const expected = diagonal.slice();
  diagonal.fill(0);
  expect(factor.inverseDiagonal()).toEqual(expected);
  const { values, rowIndices } = factor.selectedInverse({ pattern: "matrix" });
  values.fill(0);
  rowIndices.fill(0);
  expect(factor.selectedInverse({ pattern: "matrix" }).rowIndices).toEqual(matrix.rowIndices);
  factor.dispose();
});

test("1000 cycles of create, use and dispose leave memory flat", () => {
  const cycle = () => {
    const factor = factorize(matrix);
    factor.solve(new Float64Array(240).fill(1), 2);
    factor.inverseColumns([3, 7]);
    factor.inverseEntries([0, 5], [5, 9]);
    factor.inverseBlock([3, 7]);
    factor.inverseDiagonal({ method: "squares" });
    factor.inverseDiagonal();
    factor.selectedInverse();
    factor.refactor(matrix);
    factor.reciprocalCondition();
    factor.dispose();
  };
  cycle();
  const { used, capacity } = memoryUsage();
  for (let k = 0; k < 1000; k += 1) cycle();
  expect(memoryUsage()).toMatchObject({ used, capacity });
});

test("refactor takes no memory", () => {
  const factor = factorize(matrix);
  const { used, peak } = memoryUsage();
  for (let k = 0; k < 10; k += 1) factor.refactor(matrix);
  expect(memoryUsage()).toMatchObject({ used, peak });
  factor.dispose();
});

test("while an asynchronous call reads a factor, refactor is refused and dispose makes the call reject; no memory is kept", async () => {
  const large = randomDominant(1500, 2, random(12).uniform);
  const { used } = memoryUsage();
  const factor = factorize(large);
  const running = factor.selectedInverseAsync();
  expect(() => factor.refactor(large)).toThrowError(BusyError);
  await running;
  factor.refactor(large);
  const dropped = errorOf(() => factor.selectedInverseAsync());
  factor.dispose();
  expect(await dropped).toBeInstanceOf(DisposedError);
  expect(memoryUsage().used).toBe(used);
});
