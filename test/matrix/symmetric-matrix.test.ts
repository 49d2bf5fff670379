import fc from "fast-check";
import { Matrix } from "ml-matrix";
import { expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { SymmetricMatrix } from "../../src/index.js";
import { randomDominant, toDense } from "../support/facade.js";

const arraysOf = ({ columnPointers, rowIndices, values }: SymmetricMatrix) => ({ columnPointers, rowIndices, values });

test("lower, upper and full input, triplets and columns, sorted or not, give one matrix", () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 30 }), fc.nat(5), fc.integer(), (order, density, seed) => {
      const uniform = random(seed).uniform;
      const matrix = randomDominant(order, density, uniform);
      const dense = toDense(matrix);
      const places = dense.flatMap((row, i) => row.flatMap((value, j) => (value === 0 ? [] : [{ i, j, value }])));
      for (let k = places.length - 1; k > 0; k -= 1) {
        const other = Math.floor(uniform() * (k + 1));
        [places[k], places[other]] = [places[other]!, places[k]!];
      }
      for (const triangle of ["lower", "upper", "full"] as const) {
        const kept = places.filter(({ i, j }) => triangle === "full" || (triangle === "lower" ? i >= j : i <= j));
        const fromTriplets = SymmetricMatrix.fromTriplets(
          order,
          kept.map(({ i }) => i),
          kept.map(({ j }) => j),
          kept.map(({ value }) => value),
          { triangle },
        );
        const byColumn = Array.from({ length: order }, (_, column) => kept.filter(({ j }) => j === column));
        const columnPointers = [0];
        for (const column of byColumn) columnPointers.push(columnPointers.at(-1)! + column.length);
        const flat = byColumn.flat();
        const fromColumns = SymmetricMatrix.fromColumns({
          order,
          columnPointers,
          rowIndices: flat.map(({ i }) => i),
          values: flat.map(({ value }) => value),
          triangle,
        });
        expect(arraysOf(fromColumns)).toEqual(arraysOf(fromTriplets));
        expect(toDense(fromTriplets)).toEqual(dense);
      }
    }),
  );
});

test("duplicates add up in the order given, and zeros stay in the pattern", () => {
  const matrix = SymmetricMatrix.fromTriplets(2, [1, 0, 1, 1, 1], [0, 0, 1, 0, 1], [1e16, 4, 0, 1, 0]);
  expect(arraysOf(matrix)).toEqual({
    columnPointers: Int32Array.of(0, 2, 3),
    rowIndices: Int32Array.of(0, 1, 1),
    values: Float64Array.of(4, 1e16 + 1, 0),
  });
  expect(matrix.nonzeros).toBe(3);
});

test("full input may differ by rounding, and its lower half is kept", () => {
  const matrix = SymmetricMatrix.fromTriplets(2, [0, 1, 0, 1], [0, 0, 1, 1], [1, 0.3, 0.1 + 0.2, 1], { triangle: "full" });
  expect([...matrix.values]).toEqual([1, 0.3, 1]);
});

test("JᵀWJ agrees with a dense library's product, on random Jacobians with duplicates", () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 25 }), fc.integer({ min: 1, max: 15 }), fc.integer(), (rows, columns, seed) => {
      const uniform = random(seed).uniform;
      const columnPointers = [0];
      const rowIndices: number[] = [];
      const values: number[] = [];
      const dense = Matrix.zeros(rows, columns);
      for (let j = 0; j < columns; j += 1) {
        for (let k = Math.floor(uniform() * 6); k > 0; k -= 1) {
          const i = Math.floor(uniform() * rows);
          const value = 2 * uniform() - 1;
          rowIndices.push(i);
          values.push(value);
          dense.set(i, j, dense.get(i, j) + value);
        }
        columnPointers.push(values.length);
      }
      const weights = Float64Array.from({ length: rows }, uniform);
      const normal = SymmetricMatrix.fromNormalEquations({ rows, columns, columnPointers, rowIndices, values }, weights);
      const expected = dense.transpose().mmul(Matrix.diag([...weights]).mmul(dense));
      const actual = toDense(normal);
      // Each entry is a sum of at most 36 products of numbers below 6: 36 × 36 × 2 roundings of 1.1e-16.
      for (let i = 0; i < columns; i += 1)
        for (let j = 0; j < columns; j += 1) expect(Math.abs(actual[i]![j]! - expected.get(i, j))).toBeLessThan(3e-13);
    }),
  );
});

test("without weights every row counts once; a column without an entry stays without one", () => {
  const normal = SymmetricMatrix.fromNormalEquations({
    rows: 2,
    columns: 3,
    columnPointers: [0, 2, 2, 3],
    rowIndices: [0, 1, 1],
    values: [1, 2, 3],
  });
  expect(toDense(normal)).toEqual([
    [5, 0, 6],
    [0, 0, 0],
    [6, 0, 9],
  ]);
  expect(normal.nonzeros).toBe(3);
});

test("the input is copied: changing it later changes nothing", () => {
  const values = Float64Array.of(2, 3);
  const matrix = SymmetricMatrix.fromColumns({ order: 2, columnPointers: [0, 1, 2], rowIndices: [0, 1], values });
  values.fill(Number.NaN);
  expect([...matrix.values]).toEqual([2, 3]);
});
