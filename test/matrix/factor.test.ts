import fc from "fast-check";
import { CholeskyDecomposition, Matrix } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { type FactorizeOptions, factorize, SymmetricMatrix } from "../../src/index.js";
import { initFacade, randomDominant, toDense } from "../support/facade.js";

beforeAll(initFacade);

const orders = ["automatic", "minimum-degree", "nested-dissection", "natural"] as const;

/** Bound on the difference from a dense library's inverse. Both are backward stable: n · ε · condition · ‖A⁻¹‖ and a small constant; the
 *  diagonal outweighs its row by at least 0.1, so ‖A⁻¹‖∞ ≤ 10 (Varah 1975), and rows sum to less than 40. */
const bound = (order: number): number => 20 * order * Number.EPSILON * 400 * 10;

test("solutions, inverse columns, entries, diagonal and patterns agree with a dense library's inverse", () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 60 }), fc.nat(4), fc.integer(), fc.constantFrom(...orders), (order, density, seed, ordering) => {
      const uniform = random(seed).uniform;
      const matrix = randomDominant(order, density, uniform);
      const inverse = new CholeskyDecomposition(new Matrix(toDense(matrix))).solve(Matrix.eye(order));
      const close = (actual: number, expected: number) => expect(Math.abs(actual - expected)).toBeLessThan(bound(order));
      const factor = factorize(matrix, { ordering });

      const rhs = Float64Array.from({ length: 3 * order }, () => 2 * uniform() - 1);
      const expected = inverse.mmul(new Matrix([...Array(3).keys()].map((c) => [...rhs.subarray(c * order, (c + 1) * order)])).transpose());
      for (const [k, value] of factor.solve(rhs, 3).entries()) close(value, expected.get(k % order, Math.floor(k / order)));

      const columns = Array.from({ length: 20 }, () => Math.floor(uniform() * order));
      for (const [k, value] of factor.inverseColumns(columns).entries())
        close(value, inverse.get(k % order, columns[Math.floor(k / order)]!));

      const rows = columns.map(() => Math.floor(uniform() * order));
      for (const [k, value] of factor.inverseEntries(rows, columns).entries()) close(value, inverse.get(rows[k]!, columns[k]!));
      for (const [j, value] of factor.inverseDiagonal().entries()) close(value, inverse.get(j, j));

      const onMatrix = factor.selectedInverse({ pattern: "matrix" });
      expect(onMatrix.rowIndices).toEqual(matrix.rowIndices);
      expect(onMatrix.columnPointers).toEqual(matrix.columnPointers);
      for (const selected of [onMatrix, factor.selectedInverse()]) {
        expect(selected.nonzeros).toBeGreaterThanOrEqual(matrix.nonzeros);
        for (let j = 0; j < order; j += 1) {
          const from = selected.columnPointers[j]!;
          const end = selected.columnPointers[j + 1]!;
          for (let p = from; p < end; p += 1) {
            close(selected.values[p]!, inverse.get(selected.rowIndices[p]!, j));
            expect(selected.rowIndices[p]).toBeGreaterThan(p === from ? j - 1 : selected.rowIndices[p - 1]!);
          }
        }
      }
      factor.dispose();
    }),
    { numRuns: 40 },
  );
});

test("more right-hand sides than the kernel takes at once are solved like each alone", () => {
  const matrix = randomDominant(40, 3, random(7).uniform);
  const factor = factorize(matrix);
  const rhs = Float64Array.from({ length: 40 * 37 }, (_, k) => Math.sin(k));
  const together = factor.solve(rhs, 37);
  for (let c = 0; c < 37; c += 1) {
    const alone = factor.solve(rhs.subarray(40 * c, 40 * (c + 1)));
    for (let i = 0; i < 40; i += 1) expect(Math.abs(together[40 * c + i]! - alone[i]!)).toBeLessThan(bound(40));
  }
  expect(factor.solve([], 0)).toHaveLength(0);
  factor.dispose();
});

test("log-determinant and condition of a diagonal matrix are those of its entries", () => {
  const diagonal = Float64Array.of(4, 0.5, 1024, 8, 1);
  const places = [...diagonal.keys()];
  const factor = factorize(SymmetricMatrix.fromTriplets(5, places, places, diagonal));
  expect(factor.logDeterminant()).toBeCloseTo(14 * Math.log(2), 14); // 2 − 1 + 10 + 3 + 0 powers of two
  expect(factor.reciprocalCondition()).toBeCloseTo(0.5 / 1024, 16);
  // A square root, a reciprocal and a square: four roundings.
  for (const [j, value] of factor.inverseDiagonal().entries()) expect(Math.abs(value * diagonal[j]! - 1)).toBeLessThan(4 * Number.EPSILON);
  factor.dispose();
});

test("order 0 has an empty factor, order 1 a number", () => {
  const empty = factorize(SymmetricMatrix.fromTriplets(0, [], [], []));
  expect(empty.statistics).toMatchObject({ order: 0, nonzeros: 0, flops: 0, supernodes: 0 });
  expect([empty.solve([]), empty.inverseDiagonal(), empty.inverseColumns([]), empty.inverseEntries([], [])].map((x) => x.length)).toEqual([
    0, 0, 0, 0,
  ]);
  expect(empty.selectedInverse().order).toBe(0);
  expect(empty.selectedInverse({ pattern: "matrix" }).nonzeros).toBe(0);
  expect(empty.logDeterminant()).toBe(0);
  expect(empty.reciprocalCondition()).toBe(1);
  empty.refactor(SymmetricMatrix.fromTriplets(0, [], [], []));
  empty.dispose();
  const one = factorize(SymmetricMatrix.fromTriplets(1, [0], [0], [4]));
  expect([...one.solve([6])]).toEqual([1.5]);
  expect([...one.inverseDiagonal()]).toEqual([0.25]);
  one.dispose();
});

test("refactor gives the same bits as a fresh factor, and takes no memory", () => {
  const first = randomDominant(200, 4, random(1).uniform);
  const { columnPointers, rowIndices, order } = first;
  const doubled = SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values: first.values.map((v, p) => v * (1 + (p % 3))) });
  const strong = SymmetricMatrix.fromColumns({
    order,
    columnPointers,
    rowIndices,
    values: doubled.values.map((value, p) => (columnPointers.includes(p) ? 3 * value : value)),
  });
  const factor = factorize(first);
  const diagonalBefore = factor.inverseDiagonal();
  factor.refactor(strong);
  const fresh = factorize(strong);
  expect(factor.inverseDiagonal()).toEqual(fresh.inverseDiagonal());
  expect(factor.logDeterminant()).toBe(fresh.logDeterminant());
  expect(factor.reciprocalCondition()).toBe(fresh.reciprocalCondition());
  factor.refactor(first);
  expect(factor.inverseDiagonal()).toEqual(diagonalBefore);
  factor.dispose();
  fresh.dispose();
});

test("a given order and given block sizes are used", () => {
  const matrix = randomDominant(30, 2, random(3).uniform);
  const reversed = Array.from({ length: 30 }, (_, k) => 29 - k);
  const reference = factorize(matrix);
  const expected = reference.inverseDiagonal();
  expect(["minimum-degree", "nested-dissection"]).toContain(reference.statistics.ordering); // what "automatic" came to
  reference.dispose();
  const choices: [FactorizeOptions, string][] = [
    [{ ordering: reversed }, "given"],
    [{ ordering: "natural" }, "natural"],
    [{ blockSizes: Array(30).fill(1), ordering: "minimum-degree" }, "minimum-degree"],
  ];
  for (const [options, name] of choices) {
    const factor = factorize(matrix, options);
    expect(factor.statistics.ordering).toBe(name);
    expect(factor.statistics).toMatchObject({ order: 30 });
    expect(factor.statistics.nonzeros).toBeGreaterThanOrEqual(matrix.nonzeros);
    for (const [j, value] of factor.inverseDiagonal().entries()) expect(Math.abs(value - expected[j]!)).toBeLessThan(bound(30));
    factor.dispose();
  }
});
