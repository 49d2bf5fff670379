// Laws that hold for every matrix: random patterns and values, on each order of elimination.
import fc from "fast-check";
import { beforeAll, describe, expect, test } from "vitest";
import { information } from "../../bench/families/information.js";
import { families } from "../../bench/families.js";
import { EmptyColumnError, factorize, SymmetricMatrix } from "../../src/index.js";
import { denseOf, inverseByCholesky, logDeterminantByCholesky } from "../support/dense.js";
import { initFacade } from "../support/facade.js";
import { matrixOf, norm, orderings, times, triplets } from "../support/random-matrices.js";

beforeAll(initFacade);

const epsilon = 2 ** -52;
const largest = (x: ArrayLike<number>): number => Array.from(x).reduce((m, v) => Math.max(m, Math.abs(v)), 0);
const rightHandSides = (order: number, columns: number): Float64Array =>
  Float64Array.from({ length: order * columns }, (_, k) => Math.sin(1 + 7 * k));
/** A permutation that follows no pattern of the matrix. */
const scattered = (order: number): number[] => [...Array(order).keys()].sort((a, b) => Math.sin(97 * a + 1) - Math.sin(97 * b + 1));

describe.each([...orderings, "scattered"] as const)("order: %s", (name) => {
  const options = (order: number) => ({ ordering: name === "scattered" ? scattered(order) : name });

  test("P A Pᵀ = L Lᵀ: solving leaves a residual of 8 n ε ‖A‖ ‖x‖ at most, for one and for several right-hand sides", () => {
    // Backward error of Cholesky and two solves: at most about (n + 1) ε + 2 n ε per unit of ‖A‖ ‖x‖ (Higham 2002, thm. 10.4), times
    // the norm of |L| |Lᵀ| over that of A, at most n in the worst case, near 1 here.
    fc.assert(
      fc.property(triplets(30), fc.integer({ min: 1, max: 5 }), (entries, columns) => {
        const matrix = matrixOf(entries);
        const { order } = matrix;
        const factor = factorize(matrix, options(order));
        const rhs = rightHandSides(order, columns);
        const x = factor.solve(rhs, columns);
        factor.dispose();
        for (let c = 0; c < columns; c += 1) {
          const part = x.subarray(c * order, (c + 1) * order);
          const residual = times(matrix, part).map((v, i) => v - rhs[c * order + i]!);
          expect(largest(residual)).toBeLessThanOrEqual(8 * order * epsilon * (norm(matrix) * largest(part) + 1));
        }
      }),
    );
  });

  test("diagonal, columns, entries and both selected inverses agree with a dense library's inverse and determinant", () => {
    fc.assert(
      fc.property(triplets(25), (entries) => {
        const matrix = matrixOf(entries);
        const { order } = matrix;
        const dense = inverseByCholesky(denseOf(matrix));
        const factor = factorize(matrix, options(order));
        // |error| ≤ 8 n ε κ ‖A⁻¹‖ for either route; ‖A⁻¹‖₂ ≤ 1 / ridge and ‖A‖₂ ≤ ‖A‖₁.
        const most = 1 / entries.smallestEigenvalue;
        const bound = 16 * order * epsilon * norm(matrix) * most * most;
        const same = (found: number, i: number, j: number): void => expect(Math.abs(found - dense.get(i, j))).toBeLessThanOrEqual(bound);
        for (const [i, v] of factor.inverseDiagonal().entries()) same(v, i, i);
        const chosen = [order - 1, 0, order >> 1, 0];
        for (const [k, v] of factor.inverseColumns(chosen).entries()) same(v, k % order, chosen[Math.floor(k / order)]!);
        const [rows, columns] = [scattered(order), scattered(order).reverse()];
        for (const [k, v] of factor.inverseEntries(rows, columns).entries()) same(v, rows[k]!, columns[k]!);
        for (const pattern of ["factor", "matrix"] as const) {
          const selected = factor.selectedInverse({ pattern });
          expect(selected.order).toBe(order);
          for (let j = 0; j < order; j += 1)
            for (let p = selected.columnPointers[j]!; p < selected.columnPointers[j + 1]!; p += 1)
              same(selected.values[p]!, selected.rowIndices[p]!, j);
        }
        const logDeterminant = logDeterminantByCholesky(denseOf(matrix));
        // Each pivot has a relative error of n ε κ at most, and so each of n logarithms an absolute one.
        expect(Math.abs(factor.logDeterminant() - logDeterminant)).toBeLessThanOrEqual(2 * order * order * epsilon * norm(matrix) * most);
        factor.dispose();
      }),
    );
  });

  test("the selected inverse covers the matrix's pattern, and the pattern of L covers that", () => {
    fc.assert(
      fc.property(triplets(30), (entries) => {
        const matrix = matrixOf(entries);
        const factor = factorize(matrix, options(matrix.order));
        const own = factor.selectedInverse({ pattern: "matrix" });
        expect([own.columnPointers, own.rowIndices]).toEqual([matrix.columnPointers, matrix.rowIndices]);
        const whole = factor.selectedInverse();
        const places = new Set<string>();
        for (let j = 0; j < whole.order; j += 1)
          for (let p = whole.columnPointers[j]!; p < whole.columnPointers[j + 1]!; p += 1) places.add(`${whole.rowIndices[p]} ${j}`);
        for (let j = 0; j < matrix.order; j += 1)
          for (let p = matrix.columnPointers[j]!; p < matrix.columnPointers[j + 1]!; p += 1)
            expect(places.has(`${matrix.rowIndices[p]} ${j}`)).toBe(true);
        expect(places.size).toBe(whole.nonzeros);
        factor.dispose();
      }),
    );
  });

  test("permuting the unknowns permutes diagonal and solution", () => {
    fc.assert(
      fc.property(triplets(25), (entries) => {
        const matrix = matrixOf(entries);
        const { order } = matrix;
        const to = scattered(order);
        const [rows, columns] = [entries.rows.map((i) => to[i]!), entries.columns.map((j) => to[j]!)];
        const moved = SymmetricMatrix.fromTriplets(
          order,
          rows.map((i, k) => Math.max(i, columns[k]!)),
          columns.map((j, k) => Math.min(j, rows[k]!)),
          entries.values,
        );
        const [first, second] = [factorize(matrix, options(order)), factorize(moved, options(order))];
        const rhs = rightHandSides(order, 1);
        const movedRhs = new Float64Array(order);
        for (const [i, at] of to.entries()) movedRhs[at] = rhs[i]!;
        const [diagonal, movedDiagonal] = [first.inverseDiagonal(), second.inverseDiagonal()];
        const [x, movedX] = [first.solve(rhs), second.solve(movedRhs)];
        first.dispose();
        second.dispose();
        const most = 1 / entries.smallestEigenvalue;
        const bound = 16 * order * epsilon * norm(matrix) * most * most;
        for (const [i, at] of to.entries()) {
          expect(Math.abs(diagonal[i]! - movedDiagonal[at]!)).toBeLessThanOrEqual(bound);
          expect(Math.abs(x[i]! - movedX[at]!)).toBeLessThanOrEqual(bound * order);
        }
      }),
    );
  });

  test("order 0 and 1", () => {
    const none = factorize(SymmetricMatrix.fromTriplets(0, [], [], []), options(0));
    expect([none.solve([]).length, none.inverseDiagonal().length, none.selectedInverse().nonzeros]).toEqual([0, 0, 0]);
    expect([none.logDeterminant(), none.reciprocalCondition()]).toEqual([0, 1]);
    none.dispose();
    const one = factorize(SymmetricMatrix.fromTriplets(1, [0], [0], [4]), options(1));
    expect([...one.solve([8, 2], 2), ...one.inverseDiagonal(), ...one.inverseEntries([0], [0])]).toEqual([2, 0.5, 0.25, 0.25]);
    expect(one.logDeterminant()).toBeCloseTo(Math.log(4), 15);
    one.dispose();
  });

  test("one dense row: an arrow of 60, whose inverse is known", () => {
    const order = 60;
    // A = [2 I, 1; 1ᵀ, order]: Schur complement s = order − (order − 1) / 2; A⁻¹ = [I/2 + 11ᵀ / (4 s), −1 / (2 s); ·, 1 / s].
    const s = order - (order - 1) / 2;
    const hub = 20;
    const others = [...Array(order).keys()].filter((k) => k !== hub);
    const matrix = SymmetricMatrix.fromTriplets(
      order,
      [hub, ...others, ...others.map((k) => Math.max(k, hub))],
      [hub, ...others, ...others.map((k) => Math.min(k, hub))],
      [order, ...others.map(() => 2), ...others.map(() => 1)],
    );
    const factor = factorize(matrix, options(order));
    const bound = order * epsilon;
    for (const [k, v] of factor.inverseDiagonal().entries())
      expect(Math.abs(v - (k === hub ? 1 / s : 0.5 + 1 / (4 * s)))).toBeLessThan(bound);
    const [across, toHub] = factor.inverseEntries([3, 5], [50, hub]);
    expect(Math.abs(across! - 1 / (4 * s))).toBeLessThan(bound);
    expect(Math.abs(toHub! + 1 / (2 * s))).toBeLessThan(bound);
    factor.dispose();
  });

  test("parts that do not touch: covariance 0 between them, exactly, and each part's own inverse", () => {
    // Two copies of [2 −1; −1 2] interleaved, and a lone unknown.
    const matrix = SymmetricMatrix.fromTriplets(5, [0, 2, 2, 1, 4, 4, 3], [0, 0, 2, 1, 1, 4, 3], [2, -1, 2, 2, -1, 2, 5]);
    const factor = factorize(matrix, options(5));
    const inverse = factor.inverseColumns([0, 1, 2, 3, 4]);
    const expected = [2 / 3, 0, 1 / 3, 0, 0, 0, 2 / 3, 0, 0, 1 / 3, 1 / 3, 0, 2 / 3, 0, 0, 0, 0, 0, 0.2, 0, 0, 1 / 3, 0, 0, 2 / 3];
    for (const [k, v] of expected.entries()) {
      if (v === 0) expect(inverse[k]).toBe(0);
      else expect(Math.abs(inverse[k]! - v)).toBeLessThan(4 * epsilon);
    }
    expect(factor.inverseEntries([0, 3], [1, 4])).toEqual(new Float64Array(2));
    factor.dispose();
  });
});

test("entries in any order, doubled and from either triangle are the same matrix; inputs stay as they were", () => {
  fc.assert(
    fc.property(triplets(20), (entries) => {
      const before = structuredClone({ ...entries });
      const matrix = matrixOf(entries);
      expect(entries).toEqual(before);
      const upper = SymmetricMatrix.fromTriplets(entries.order, entries.columns, entries.rows, entries.values, { triangle: "upper" });
      const halves = SymmetricMatrix.fromTriplets(
        entries.order,
        [...entries.rows, ...entries.rows],
        [...entries.columns, ...entries.columns],
        [...entries.values, ...entries.values].map((v) => v / 2),
      );
      const dense = denseOf(matrix);
      for (const other of [upper, halves]) {
        expect([other.columnPointers, other.rowIndices]).toEqual([matrix.columnPointers, matrix.rowIndices]);
        // Sums of at most 3 n duplicates in another order.
        const scale = 8 * entries.order * epsilon * norm(matrix);
        for (const [p, v] of other.values.entries()) expect(Math.abs(v - matrix.values[p]!)).toBeLessThanOrEqual(scale);
      }
      for (const [k, i] of entries.rows.entries()) expect(dense.get(i, entries.columns[k]!)).toBe(dense.get(entries.columns[k]!, i));

      const values = matrix.values.slice();
      const rhs = rightHandSides(entries.order, 2);
      const rhsBefore = rhs.slice();
      const factor = factorize(matrix);
      factor.solve(rhs, 2);
      factor.selectedInverse();
      factor.dispose();
      expect(matrix.values).toEqual(values);
      expect(rhs).toEqual(rhsBefore);
    }),
  );
});

test("a column with no entry is refused by name", () => {
  const matrix = SymmetricMatrix.fromTriplets(4, [0, 1, 3], [0, 1, 3], [1, 1, 1]);
  expect(() => factorize(matrix)).toThrow(EmptyColumnError);
});

test("two factors of one matrix have the same bits, and refactor to the same values keeps them", () => {
  const { order, columnPointers, rowIndices, values, blockSizes } = information(families.patrol.make(300));
  const matrix = SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values });
  const [first, second] = [factorize(matrix, { blockSizes }), factorize(matrix, { blockSizes })];
  expect(second.inverseDiagonal()).toEqual(first.inverseDiagonal());
  const doubled = SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values: values.map((v) => 2 * v) });
  second.refactor(doubled);
  // A power of two moves only exponents until a square root of 2 enters: n ε covers its rounding.
  for (const [i, v] of second.inverseDiagonal().entries())
    expect(Math.abs(2 * v - first.inverseDiagonal()[i]!)).toBeLessThan(order * epsilon * v * 1e4);
  second.refactor(matrix);
  expect(second.inverseDiagonal()).toEqual(first.inverseDiagonal());
  first.dispose();
  second.dispose();
});
