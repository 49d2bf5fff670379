// Factor, solution and inverse of published matrices against references in quad arithmetic (113 bits).
import { beforeAll, describe, expect, test } from "vitest";
import { type CholeskyFactor, factorize, type SparseColumns, SymmetricMatrix } from "../../src/index.js";
import { accuracyOf } from "../support/accuracy.js";
import { denseOf, inverseByCholesky } from "../support/dense.js";
import { initFacade } from "../support/facade.js";
import {
  column,
  designMatrix,
  type GraphReference,
  type LeastSquaresReference,
  publishedMatricesPresent,
  publishedText,
  reference,
  type SymmetricReference,
} from "../support/published-matrices.js";
import { heldLaplacian, resistances } from "../support/resistors.js";

if (!publishedMatricesPresent) console.warn("../shared/data/matrices is absent: the checks on published matrices are skipped");
beforeAll(initFacade);

const close = (found: number, printed: string | number, bound: number): void => {
  const truth = Number(printed);
  expect(Math.abs(found - truth)).toBeLessThanOrEqual(bound * Math.abs(truth));
};
const sum = (values: ArrayLike<number>): number => Array.from(values).reduce((total, v) => total + v, 0);
const entriesOf = (factor: CholeskyFactor, printed: readonly [number, number, string][]): Float64Array =>
  factor.inverseEntries(
    printed.map(([i]) => i - 1),
    printed.map(([, j]) => j - 1),
  );

/** Relative errors allowed to the diagonal of the inverse: what a dense Cholesky in double arithmetic reached, times ten for another order
 *  of summing; never more than condition × ε × order allows. */
const symmetric = [
  { name: "494_bus", bound: 5e-11 },
  { name: "1138_bus", bound: 5e-11 },
  { name: "gr_30_30", bound: 1e-13 },
  { name: "bcsstk01", bound: 1e-12 },
  { name: "bcsstk13", bound: 1e-10 },
  { name: "Chem97ZtZ", bound: 1e-13 },
] as const;

describe.skipIf(!publishedMatricesPresent)("symmetric matrices", () => {
  test.each(symmetric)("$name: the whole diagonal of the inverse, entries in and out of the pattern, determinant", ({ name, bound }) => {
    const truth = reference<SymmetricReference>(`${name}.ref.json`);
    const matrix = SymmetricMatrix.fromMatrixMarket(publishedText(`${name}.mtx`));
    expect(matrix.order).toBe(truth.n);
    const factor = factorize(matrix);
    const diagonal = factor.inverseDiagonal();
    for (const [i, v] of truth.inverseDiagonal.entries()) close(diagonal[i]!, v, bound);
    close(sum(diagonal), truth.traceInverse, bound);
    close(factor.logDeterminant(), truth.logDet, 1e-13);
    // Entries away from the diagonal: relative to the two standard deviations, as they may cancel.
    for (const printed of [truth.inverseInPattern, truth.inverseOutsidePattern]) {
      for (const [k, found] of entriesOf(factor, printed).entries()) {
        const [i, j, v] = printed[k]!;
        expect(Math.abs(found - Number(v))).toBeLessThanOrEqual(bound * Math.sqrt(diagonal[i - 1]! * diagonal[j - 1]!));
      }
    }
    const selected = factor.selectedInverse({ pattern: "matrix" });
    for (const [i, j, v] of truth.inverseInPattern) {
      const rows = selected.rowIndices.subarray(selected.columnPointers[j - 1], selected.columnPointers[j]);
      const found = selected.values[selected.columnPointers[j - 1]! + rows.indexOf(i - 1)]!;
      expect(Math.abs(found - Number(v))).toBeLessThanOrEqual(bound * Math.sqrt(diagonal[i - 1]! * diagonal[j - 1]!));
    }
    factor.dispose();
  });

  test("1138_bus: determinant and trace of the inverse by the published singular values", () => {
    // SuiteSparse Matrix Collection: logarithms add up to 4240.821184502391; reciprocals, limited by the smallest's digits, to 488.2123077.
    const factor = factorize(SymmetricMatrix.fromMatrixMarket(publishedText("1138_bus.mtx")));
    close(factor.logDeterminant(), 4240.821184502391, 1e-13);
    close(sum(factor.inverseDiagonal()), 488.21230771555815, 2e-11);
    factor.dispose();
  });
});

/** Rows' redundancy numbers 1 − a Z aᵀ, Z read on the pattern of N, which holds every pair of a row; and (Σ |a| σ)², the sum that cancels. */
function redundancyNumbers(design: SparseColumns, cofactor: SymmetricMatrix): { value: number; terms: number }[] {
  const rows: { j: number; v: number }[][] = Array.from({ length: design.rows }, () => []);
  for (let j = 0; j < design.columns; j += 1)
    for (let p = design.columnPointers[j]!; p < design.columnPointers[j + 1]!; p += 1)
      rows[design.rowIndices[p]!]!.push({ j, v: design.values[p]! });
  const place = new Map<number, number>();
  for (let j = 0; j < cofactor.order; j += 1)
    for (let p = cofactor.columnPointers[j]!; p < cofactor.columnPointers[j + 1]!; p += 1)
      place.set(j * cofactor.order + cofactor.rowIndices[p]!, cofactor.values[p]!);
  const at = (a: number, b: number): number => place.get(Math.min(a, b) * cofactor.order + Math.max(a, b))!;
  return rows.map((row) => ({
    value: 1 - sum(row.map((a) => sum(row.map((b) => a.v * b.v * at(a.j, b.j))))),
    terms: sum(row.map(({ j, v }) => Math.abs(v) * Math.sqrt(at(j, j)))) ** 2,
  }));
}

function weightedProducts(design: SparseColumns, weights: ArrayLike<number>, observed: readonly number[]): number[] {
  return Array.from({ length: design.columns }, (_, j) => {
    let total = 0;
    for (let p = design.columnPointers[j]!; p < design.columnPointers[j + 1]!; p += 1) {
      const r = design.rowIndices[p]!;
      total += weights[r]! * design.values[p]! * observed[r]!;
    }
    return total;
  });
}

/** Like `design`, with one more row: value 1 in column 0 and −1 in the last. */
function withTie(design: SparseColumns): SparseColumns {
  const { rows, columns } = design;
  const pointers = Array.from(design.columnPointers);
  const [rowIndices, values] = [Array.from(design.rowIndices), Array.from(design.values)];
  rowIndices.splice(pointers[1]!, 0, rows);
  values.splice(pointers[1]!, 0, 1);
  rowIndices.push(rows);
  values.push(-1);
  return {
    rows: rows + 1,
    columns,
    columnPointers: pointers.map((p, j) => p + (j > 0 ? 1 : 0) + (j === columns ? 1 : 0)),
    rowIndices,
    values,
  };
}

describe.skipIf(!publishedMatricesPresent).each([
  // What a dense Cholesky of the normal matrix keeps of the cofactors, times ten; solutions lose as much, on numbers up to 1e3.
  { name: "well1033", bound: 2e-11 },
  { name: "well1850", bound: 3e-12 },
  { name: "illc1850", bound: 1e-9 },
])("least squares in surveying: $name (Paige, Saunders 1982)", ({ name, bound }) => {
  const solutionError = (found: ArrayLike<number>, printed: readonly string[]): number => {
    const size = Math.max(...printed.map((v) => Math.abs(Number(v))));
    return Math.max(...printed.map((v, j) => Math.abs(found[j]! - Number(v)))) / size;
  };

  test("cofactors, solution, determinant, redundancy numbers", () => {
    const truth = reference<LeastSquaresReference>(`${name}.ref.json`);
    const design = designMatrix(`${name}.mtx`);
    const factor = factorize(SymmetricMatrix.fromNormalEquations(design));
    const diagonal = factor.inverseDiagonal();
    for (const [j, v] of truth.cofactorDiagonal.entries()) close(diagonal[j]!, v, bound);
    close(sum(diagonal), truth.traceCofactor, bound);
    close(factor.logDeterminant(), truth.logDetN, bound);
    for (const printed of [truth.cofactorInPattern, truth.cofactorOutsidePattern]) {
      for (const [k, found] of entriesOf(factor, printed).entries()) {
        const [i, j, v] = printed[k]!;
        expect(Math.abs(found - Number(v))).toBeLessThanOrEqual(bound * Math.sqrt(diagonal[i - 1]! * diagonal[j - 1]!));
      }
    }
    const ones = new Float64Array(design.rows).fill(1);
    const solution = factor.solve(weightedProducts(design, ones, column(`${name}_rhs.mtx`)));
    expect(solutionError(solution, truth.solution)).toBeLessThan(bound);
    const redundancy = redundancyNumbers(design, factor.selectedInverse({ pattern: "matrix" }));
    for (const [r, v] of truth.redundancyNumbers.entries())
      expect(Math.abs(redundancy[r]!.value - Number(v))).toBeLessThan(bound * redundancy[r]!.terms);
    const total = sum(redundancy.map(({ value }) => value));
    expect(Math.abs(total - truth.degreesOfFreedom)).toBeLessThan(bound * sum(redundancy.map(({ terms }) => terms)));
    factor.dispose();
  });

  test("rows taken out by refactoring; then rows seen again and one tie added", () => {
    const truth = reference<LeastSquaresReference>(`${name}.ref.json`);
    const design = designMatrix(`${name}.mtx`);
    const observed = column(`${name}_rhs.mtx`);
    const weights = new Float64Array(design.rows).fill(1);
    const factor = factorize(SymmetricMatrix.fromNormalEquations(design, weights));
    const check = (
      current: CholeskyFactor,
      rhs: readonly number[],
      step: LeastSquaresReference["update1"] | LeastSquaresReference["update2"],
    ) => {
      const diagonal = current.inverseDiagonal();
      for (const [j, v] of step.cofactorDiagonal.entries()) close(diagonal[j]!, v, bound);
      close(sum(diagonal), step.traceCofactor, bound);
      close(current.logDeterminant(), step.logDetN, bound);
      expect(solutionError(current.solve(rhs), step.solution)).toBeLessThan(bound);
    };
    for (const row of truth.update1.removedRows) weights[row - 1] = 0;
    factor.refactor(SymmetricMatrix.fromNormalEquations(design, weights));
    check(factor, weightedProducts(design, weights, observed), truth.update1);
    factor.dispose();
    for (const row of truth.update2.addedCopies) weights[row - 1]! += truth.update2.copyWeight;
    const tied = withTie(design);
    const tiedWeights = [...weights, 4];
    const second = factorize(SymmetricMatrix.fromNormalEquations(tied, tiedWeights));
    check(second, weightedProducts(tied, tiedWeights, [...observed, 0.25]), truth.update2);
    second.dispose();
  });

  test("the worst cofactor is off by at most ten times what a dense library's is", () => {
    const truth = reference<LeastSquaresReference>(`${name}.ref.json`).cofactorDiagonal.map(Number);
    const matrix = SymmetricMatrix.fromNormalEquations(designMatrix(`${name}.mtx`));
    const factor = factorize(matrix);
    const worst = (found: ArrayLike<number>): number => Math.max(...truth.map((v, j) => Math.abs(found[j]! / v - 1)));
    expect(worst(factor.inverseDiagonal())).toBeLessThanOrEqual(10 * worst(inverseByCholesky(denseOf(matrix)).diagonal()));
    factor.dispose();
  });
});

describe.skipIf(!publishedMatricesPresent)("accuracy beside a dense library, on every entry of the selected inverse", () => {
  test.each(["494_bus", "bcsstk01"])("%s", (name) => {
    const { selected, dense } = accuracyOf(SymmetricMatrix.fromMatrixMarket(publishedText(`${name}.mtx`)));
    expect(selected).toBeLessThanOrEqual(10 * dense);
  });

  test("well1033", () => {
    const { selected, dense } = accuracyOf(SymmetricMatrix.fromNormalEquations(designMatrix("well1033.mtx")));
    expect(selected).toBeLessThanOrEqual(10 * dense);
  });
});

describe.skipIf(!publishedMatricesPresent)("networks of unit resistors", () => {
  test.each([
    { name: "ash219", what: "the survey of Holland (Ashkenazi 1974)" },
    { name: "bcspwr03", what: "a power network of 118 nodes" },
  ])("$name, $what: spanning trees (Kirchhoff 1847), every point and every edge", ({ name }) => {
    const truth = reference<GraphReference>(`${name}.graph.json`);
    // Point 1 is held: it becomes the last vertex.
    const edges = truth.edges.map(([a, b]) => [truth.n - a, truth.n - b] as const);
    const factor = factorize(heldLaplacian({ vertices: truth.n, edges }));
    const diagonal = factor.inverseDiagonal();
    // κ of these held Laplacians is below 1e4.
    const bound = 1e4 * 2 ** -52;
    for (const [k, v] of truth.cofactorDiagonal.entries()) close(diagonal[truth.n - (k + 2)]!, v, bound);
    close(factor.logDeterminant(), truth.logDetN, bound);
    const found = resistances(factor, edges);
    for (const [k, v] of truth.edgeResistance.entries()) close(found[k]!, v, bound);
    close(sum(found), truth.n - 1, bound);
    factor.dispose();
  });
});
