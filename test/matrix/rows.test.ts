// Measurement rows to a factor without squaring their condition: certified fits, exact fractions, double-double.
import { beforeAll, describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { byColumns, whitenedRows } from "../../bench/families/rows.js";
import { type FamilyName, families } from "../../bench/families.js";
import {
  factorize,
  factorizeRows,
  factorizeRowsAsync,
  leastSquares,
  memoryUsage,
  NotPositiveDefiniteError,
  RankDeficientError,
  RowFactorError,
  SymmetricMatrix,
} from "../../src/index.js";
import { EnvelopeCholesky } from "../support/envelope.js";
import { exactRows } from "../support/exact-rows.js";
import { ExactSums } from "../support/exact-twin.js";
import { errorOf, initFacade } from "../support/facade.js";
import { randomFrom } from "../support/pipeline.js";
import { inverseExactly, Rational, solveExactly } from "../support/rational.js";
import { jacobianOf } from "../support/sparse-rows.js";
import { agreeingDigits, designRow, linearFits } from "../support/strd.js";

beforeAll(initFacade);

const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);
const sum = (terms: readonly number[]) => terms.reduce((a, b) => a + b, 0);
const unit = Number.EPSILON / 2;

describe("NIST StRD linear fits, raw columns (https://www.itl.nist.gov/div898/strd/lls/lls.shtml)", () => {
  /** Digits kept at least: parameters by the reflections alone, after one refinement, standard deviations. Filip's powers are rounded when they are formed, which
   *  leaves about 8 digits of the certified values to any method (κ = 1.8e15, 5.2e9 with columns of norm 1). */
  test.each([
    { name: "Filip", plain: 7, refined: 7.5, deviations: 7 },
    { name: "Longley", plain: 10, refined: 13, deviations: 11 },
    { name: "Pontius", plain: 11, refined: 13, deviations: 13 },
    { name: "Norris", plain: 12, refined: 13.5, deviations: 13 },
    { name: "Wampler1", plain: 8.5, refined: 14, deviations: undefined },
    { name: "Wampler3", plain: 8.5, refined: 14, deviations: 12.5 },
    { name: "Wampler4", plain: 7, refined: 14, deviations: 12.5 },
  ] as const)(
    "$name: parameters to $plain digits, $refined refined, standard deviations to $deviations",
    ({ name, plain, refined, deviations }) => {
      const { model, data, parameters, standardDeviations } = linearFits[name];
      const design = data.map(([, ...predictors]) => designRow(model, predictors));
      const responses = data.map(([response]) => response!);
      for (const { refine, digits } of [
        { refine: false, digits: plain },
        { refine: true, digits: refined },
      ]) {
        const { solution, factor, weightedSquares } = leastSquares(jacobianOf(design, true), responses, { route: "orthogonal", refine });
        expect(factor.statistics.rows?.route).toBe("orthogonal");
        for (const [k, value] of solution.entries()) expect(agreeingDigits(value, parameters[k]!)).toBeGreaterThan(digits);
        const s = Math.sqrt(weightedSquares / (data.length - parameters.length));
        if (deviations)
          for (const [k, v] of factor.inverseDiagonal().entries())
            expect(agreeingDigits(s * Math.sqrt(v), standardDeviations[k]!)).toBeGreaterThan(deviations);
        factor.dispose();
      }
    },
  );

  test("automatic keeps to the information matrix for Norris and leaves it for Longley and Filip", () => {
    const routeOf = (name: "Norris" | "Longley" | "Filip") => {
      const { model, data } = linearFits[name];
      const factor = factorizeRows(jacobianOf(data.map(([, ...predictors]) => designRow(model, predictors))));
      factor.dispose();
      return factor.statistics.rows!;
    };
    expect(routeOf("Norris")).toMatchObject({
      route: "information",
      because: expect.stringMatching(/condition of about \d.*digits enough/),
    });
    expect(routeOf("Longley")).toMatchObject({
      route: "orthogonal",
      because: expect.stringMatching(/condition of about .*costs too many/),
    });
    expect(routeOf("Filip").route).toBe("orthogonal");
  });
});

describe("exact fractions", () => {
  const exactly = (rows: readonly (readonly number[])[], right: readonly number[]) => {
    const a = rows.map((row) => row.map((v) => Rational.fromNumber(v)));
    const total = (terms: Rational[]) => terms.reduce((x, y) => x.plus(y), Rational.of(0));
    const normal = a[0]!.map((_, i) => a[0]!.map((__, j) => total(a.map((row) => row[i]!.times(row[j]!)))));
    const vector = a[0]!.map((_, i) => total(a.map((row, r) => row[i]!.times(Rational.fromNumber(right[r]!)))));
    return {
      variances: inverseExactly(normal).map((row, i) => row[i]!.toNumber()),
      solution: solveExactly(normal, vector).map((v) => v.toNumber()),
    };
  };
  const errors = (rows: number[][], right: number[]) => {
    const { variances, solution } = exactly(rows, right);
    const found = leastSquares(jacobianOf(rows, true), right, { route: "orthogonal" });
    const refined = leastSquares(jacobianOf(rows, true), right, { route: "orthogonal", refine: true });
    const worst = (values: Float64Array, exact: number[]) => Math.max(...exact.map((v, k) => Math.abs(values[k]! / v - 1)));
    const byNorm = (values: Float64Array) =>
      Math.max(...solution.map((v, k) => Math.abs(values[k]! - v))) / Math.max(...solution.map(Math.abs));
    const result = {
      variance: worst(found.factor.inverseDiagonal(), variances),
      square: worst(
        Float64Array.from(variances, (_, k) => found.factor.inverseBlock([k])[0]!),
        variances,
      ),
      solution: byNorm(found.solution),
      refined: byNorm(refined.solution),
    };
    found.factor.dispose();
    refined.factor.dispose();
    return result;
  };

  /** Läuchli, "Jordan-Elimination und Ausgleichung nach kleinsten Quadraten", Numer. Math. 3 (1961): a row of ones over δ times the identity. With δ² below the
   *  unit roundoff JᵀJ is singular in f64, while κ(J) = √(δ² + n) ÷ δ. */
  test.each([2 ** -20, 2 ** -27, 2 ** -30])("Läuchli's matrix with δ = %s: every digit that κ(J) leaves", (delta) => {
    for (const n of [2, 5, 9]) {
      const rows = [new Array<number>(n).fill(1), ...upTo(n).map((i) => upTo(n).map((j) => (i === j ? delta : 0)))];
      const right = [n, ...upTo(n).map((j) => delta * (1 + j))];
      const condition = Math.sqrt(delta * delta + n) / delta;
      const { variance, square, solution, refined } = errors(rows, right);
      // 2 κ for a variance, with γ of a few roundings a row and column (Higham, chapters 19 and 20).
      const bound = 2 * condition * 4 * n * unit;
      expect(variance).toBeLessThan(bound);
      expect(square).toBeLessThan(bound);
      expect(solution).toBeLessThan(bound);
      expect(refined).toBeLessThan(1e-14);
      if (delta < 2 ** -26) expect(() => factorizeRows(jacobianOf(rows), { route: "information" })).toThrowError(NotPositiveDefiniteError);
    }
  });

  test("Vandermonde rows on 1, ½, … 1 ÷ m, monomials to degree 7: κ about 1e7", () => {
    const points = upTo(14).map((k) => 1 / (k + 1));
    const rows = points.map((t) => upTo(8).map((j) => t ** j));
    const { variance, square, solution, refined } = errors(
      rows,
      points.map((t) => Math.cos(3 * t)),
    );
    // Singular values by a general library once: κ₂ = 1.094e7 with columns of norm 1.
    const condition = 1.1e7;
    const bound = 2 * condition * 14 * 8 * unit;
    for (const error of [variance, square, solution]) expect(error).toBeLessThan(bound);
    expect(refined).toBeLessThan(1e-12);
  });
});

/** A random network: states of equal dimension in a tree with ties, each block of rows with a weight of its own over `decades` orders of magnitude. */
function weightedNetwork(seed: number, decades: number) {
  const random = randomFrom(seed * 7919);
  for (let k = 0; k < 5; k += 1) random();
  const states = 2 + Math.floor(7 * random());
  const dimension = 1 + Math.floor(3 * random());
  const rows: number[][] = [];
  const weights: number[] = [];
  const measure = (of: readonly number[]) => {
    const weight = 10 ** (decades * (random() - 0.5));
    for (let r = 0; r < dimension; r += 1) {
      const row = new Array<number>(states * dimension).fill(0);
      for (const s of of) for (let u = 0; u < dimension; u += 1) row[s * dimension + u] = 2 * random() - 1;
      rows.push(row);
      weights.push(weight);
    }
  };
  measure([0]);
  for (let s = 1; s < states; s += 1) measure([Math.floor(s * random()), s]);
  for (let t = 2 * states * random(); t > 0; t -= 1) {
    const [a, b] = [Math.floor(states * random()), Math.floor(states * random())];
    measure(a === b ? [a] : [a, b]);
  }
  return { rows, weights, right: rows.map(() => 2 * random() - 1), states, dimension };
}

test("1 000 random networks with weights over 12 orders of magnitude: every variance within its bound, in double-double", () => {
  // The factor is exact for rows that differ from those given by a few roundings of each row's own size ρ (Cox, Higham 1998), and Y = L⁻¹e errs by |L⁻¹||L||L⁻¹| roundings
  // (Higham, chapter 8): to first order, with P = J̃ Σ and X = R⁻¹,
  //   |δΣ_jj| ≤ 4 (m + n) u (2 Σᵢ |P_ij| ρᵢ Σₖ |Σ_kj| + 2 Σₖ (|X||R||X|)_jk |X_jk|).
  let refused = 0;
  for (let seed = 1; seed <= 1000; seed += 1) {
    const { rows, weights, right, states, dimension } = weightedNetwork(seed, 12);
    const { rows: whitened, triangle, inverseTriangle, cofactors } = exactRows(rows, weights, right);
    const n = cofactors.length;
    const sizes = whitened.map((row) => Math.max(...row.map(Math.abs)));
    const magnitude = inverseTriangle.map((row) => upTo(n).map((k) => sum(row.map((v, l) => Math.abs(v * triangle[l]![k]!)))));
    const factor = factorizeRows(jacobianOf(rows), { weights, route: "orthogonal" });
    for (let s = 0; s < states; s += 1) {
      const unknowns = upTo(dimension).map((u) => s * dimension + u);
      const block = factor.inverseBlock(unknowns);
      for (const [u, j] of unknowns.entries()) {
        const column = cofactors.map((row) => row[j]!);
        const influence = whitened.map((row) => Math.abs(sum(row.map((v, k) => v * column[k]!))));
        const byRows = 2 * sum(influence.map((p, i) => p * sizes[i]!)) * sum(column.map(Math.abs));
        const byTriangle =
          2 *
          sum(
            upTo(n).map(
              (k) => sum(upTo(n).map((l) => magnitude[j]![l]! * Math.abs(inverseTriangle[l]![k]!))) * Math.abs(inverseTriangle[j]![k]!),
            ),
          );
        expect(Math.abs(block[u * (dimension + 1)]! - column[j]!)).toBeLessThanOrEqual(
          4 * (rows.length + n) * unit * (byRows + byTriangle),
        );
      }
    }
    factor.dispose();
    if (refused === 0 && seed <= 50) {
      // Forming JᵀWJ is not good for this: some of these networks it cannot even factor, or not to eight digits.
      try {
        const information = factorize(SymmetricMatrix.fromNormalEquations(jacobianOf(rows), weights));
        const worst = Math.max(...information.inverseDiagonal().map((v, j) => Math.abs(v / cofactors[j]![j]! - 1)));
        information.dispose();
        if (worst > 1e-8) refused += 1;
      } catch {
        refused += 1;
      }
    }
  }
  expect(refused).toBeGreaterThan(0);
});

test("a chain of 10 000 poses on one prior: variances agree with double-double to 1e-9 in every order", () => {
  const poses = 10_000;
  const stream = chain(poses, { fixEvery: 0 });
  const sums = new ExactSums(3 * poses);
  for (const k of upTo(stream.measurements))
    sums.measure(
      stream.measurement(k),
      (state) => 3 * state,
      () => 3,
    );
  const exact = new EnvelopeCholesky(sums.columns()).inverseDiagonal();
  const jacobian = byColumns(whitenedRows(stream));
  for (const ordering of ["automatic", "minimum-degree", "natural"] as const) {
    const factor = factorizeRows(jacobian, { ordering });
    expect(factor.statistics.rows?.route).toBe("orthogonal");
    const worst = factor.inverseDiagonal().reduce((most, v, j) => Math.max(most, Math.abs(v / exact[j]! - 1)), 0);
    expect(worst).toBeLessThan(1e-9);
    factor.dispose();
  }
});

describe("on every family", () => {
  const sizes: Partial<Record<FamilyName, number>> = {
    net: 300,
    patrol: 300,
    helix: 120,
    landmarks: 300,
    chain: 300,
    grid: 400,
    heavy: 150,
  };
  test.each(Object.keys(sizes) as FamilyName[])(
    "%s: both routes agree as far as the condition lets them, sliced calls give the same bits, and memory goes back",
    async (name) => {
      const { used } = memoryUsage();
      const rows = whitenedRows(families[name].make(sizes[name]!));
      const jacobian = byColumns(rows);
      const blind = factorizeRows(jacobian, { route: "information" });
      const { factor, solution } = leastSquares(jacobian, rows.residual, { route: "orthogonal" });
      // κ₁ of JᵀWJ by its own estimate, which may be three times too small.
      const tolerance = Math.max(1e-12, (3 * factor.order * unit) / factor.reciprocalCondition());
      const [direct, squared] = [factor.inverseDiagonal(), blind.inverseDiagonal()];
      for (const [j, v] of direct.entries()) expect(Math.abs(squared[j]! / v - 1)).toBeLessThan(tolerance);
      expect(Math.abs(factor.logDeterminant() / blind.logDeterminant() - 1)).toBeLessThan(1e-9);
      // The gradient of the least squares vanishes: Jᵀ (b − J x) is rounding noise of what it is summed from.
      const gradient = new Float64Array(rows.columns);
      const scale = new Float64Array(rows.columns);
      for (let r = 0; r < rows.rows; r += 1) {
        let rest = rows.residual[r]!;
        let size = Math.abs(rest);
        for (let p = rows.rowPointers[r]!; p < rows.rowPointers[r + 1]!; p += 1) {
          rest -= rows.values[p]! * solution[rows.columnIndices[p]!]!;
          size += Math.abs(rows.values[p]! * solution[rows.columnIndices[p]!]!);
        }
        for (let p = rows.rowPointers[r]!; p < rows.rowPointers[r + 1]!; p += 1) {
          gradient[rows.columnIndices[p]!]! += rows.values[p]! * rest;
          scale[rows.columnIndices[p]!]! += Math.abs(rows.values[p]!) * size;
        }
      }
      for (const [j, g] of gradient.entries()) expect(Math.abs(g)).toBeLessThan(1e-9 * scale[j]!);

      const fractions: number[] = [];
      const sliced = await factorizeRowsAsync(jacobian, { route: "orthogonal", onProgress: (fraction) => fractions.push(fraction) });
      expect(sliced.inverseDiagonal()).toEqual(direct);
      for (const [k, fraction] of fractions.entries()) expect(fraction).toBeGreaterThanOrEqual(fractions[k - 1] ?? 0);
      expect(fractions.at(-1)).toBe(1);

      const block = factor.inverseBlock([0, 2, 5, 2]);
      const entries = factor.inverseEntries([0, 0, 2, 5], [0, 5, 2, 2]);
      const largest = Math.max(block[0]!, block[5]!, block[10]!);
      for (const [k, at] of [0, 2, 5, 9].entries()) expect(Math.abs(block[at]! - entries[k]!)).toBeLessThan(1e-12 * largest);
      for (const [j, v] of factor.inverseDiagonal({ method: "squares" }).entries())
        expect(Math.abs(direct[j]! / v - 1)).toBeLessThan(tolerance);
      for (const one of [factor, blind, sliced]) one.dispose();
      expect(memoryUsage().used).toBe(used);
    },
  );
});

describe("unknowns that rows leave free", () => {
  /** Rows that touch one state alone are left out, so that nothing ties the network down; what is short of rows has them doubled. */
  const floating = (name: FamilyName, size: number) => {
    const stream = families[name].make(size);
    const dimension = stream.dimension(0);
    const rows = whitenedRows(stream);
    const dense: { columns: Int32Array; values: Float64Array }[] = [];
    for (let r = 0; r < rows.rows; r += 1) {
      const [from, to] = [rows.rowPointers[r]!, rows.rowPointers[r + 1]!];
      const columns = rows.columnIndices.subarray(from, to);
      if (new Set(columns.map((j) => Math.floor(j / dimension))).size > 1) dense.push({ columns, values: rows.values.subarray(from, to) });
    }
    const all = dense.length < rows.columns ? [...dense, ...dense] : dense;
    const rowPointers = new Int32Array(all.length + 1);
    for (const [r, { columns }] of all.entries()) rowPointers[r + 1] = rowPointers[r]! + columns.length;
    return byColumns({
      rows: all.length,
      columns: rows.columns,
      rowPointers,
      columnIndices: Int32Array.from(all.flatMap(({ columns }) => [...columns])),
      values: Float64Array.from(all.flatMap(({ values }) => [...values])),
      residual: new Float64Array(all.length),
    });
  };
  test.each([
    ["net", 100],
    ["net", 10_000],
    ["patrol", 1000],
    ["helix", 1000],
    ["chain", 10_000],
    ["grid", 10_000],
  ] as const)("%s of %s states without anything that ties it down is refused by every route, and an unknown named", async (name, size) => {
    const { used } = memoryUsage();
    const jacobian = floating(name, size);
    for (const route of ["automatic", "orthogonal"] as const) {
      const error = await errorOf(() => factorizeRows(jacobian, { route }));
      expect(error).toBeInstanceOf(RankDeficientError);
      const { column, remaining, size: columnSize } = error as RankDeficientError;
      expect(Number.isInteger(column) && column >= 0 && column < jacobian.columns).toBe(true);
      expect(remaining).toBeLessThan(1e-6 * columnSize);
    }
    expect(memoryUsage().used).toBe(used);
  });

  test("500 random networks of differences with weights over 24 orders of magnitude are refused, and taken once a prior ties them down", async () => {
    for (let seed = 1; seed <= 500; seed += 1) {
      const random = randomFrom(seed * 104_729);
      for (let k = 0; k < 4; k += 1) random();
      const n = 2 + Math.floor(30 * random());
      const rows: number[][] = [];
      const tie = (a: number, b: number, weight: number) => {
        const row = new Array<number>(n).fill(0);
        row[a] = weight;
        row[b] = -weight;
        rows.push(row);
      };
      for (let k = n + Math.floor(40 * random()); k > 0; k -= 1) {
        const a = Math.floor(n * random());
        tie(a, (a + 1 + Math.floor((n - 1) * random())) % n, 10 ** (12 * (random() - 0.5)));
      }
      for (let a = 1; a < n; a += 1) tie(a, Math.floor(a * random()), 1);
      expect(await errorOf(() => factorizeRows(jacobianOf(rows), { route: "orthogonal" }))).toBeInstanceOf(RankDeficientError);
      rows.push(upTo(n).map((j) => (j === seed % n ? 1 : 0)));
      const factor = factorizeRows(jacobianOf(rows), { route: "orthogonal" });
      // The unknown tied down is as sure as its prior: differences tell nothing of the whole.
      expect(Math.abs(factor.inverseBlock([seed % n])[0]! - 1)).toBeLessThan(1e-8);
      factor.dispose();
    }
  });
});

test("weights: rows of weight zero are left out and told; the rest count as whitened rows do", () => {
  const rows = [
    [1, 0],
    [1, 1],
    [5, 7],
    [0, 1],
  ];
  const factor = factorizeRows(jacobianOf(rows), { weights: [4, 1, 0, 9], route: "orthogonal" });
  expect(factor.statistics.rows).toEqual({ route: "orthogonal", because: "the orthogonal route was asked for", ignored: [2] });
  // JᵀWJ = [5 1; 1 10], its inverse [10 −1; −1 5] ÷ 49.
  for (const [k, v] of [10, -1, -1, 5].entries()) expect(Math.abs(factor.inverseBlock([0, 1])[k]! - v / 49)).toBeLessThan(1e-16);
  expect(factor.inverseColumns([0])[1]).toBeCloseTo(-1 / 49, 15);
  expect(() => factor.refactor(SymmetricMatrix.fromTriplets(2, [0, 1, 1], [0, 0, 1], [5, 1, 10]))).toThrowError(RowFactorError);
  factor.dispose();
  const { solution, weightedSquares, factor: other } = leastSquares(jacobianOf(rows), [1, 5, 100, 3], { weights: [4, 1, 0, 9] });
  // Normal equations [5 1; 1 10] x = [9, 32]: x = (58, 151) ÷ 49, residuals (−9, 36, −4) ÷ 49.
  for (const [k, v] of [58 / 49, 151 / 49].entries()) expect(Math.abs(solution[k]! - v)).toBeLessThan(1e-15);
  expect(Math.abs(weightedSquares - (4 * 81 + 36 * 36 + 9 * 16) / 49 ** 2)).toBeLessThan(1e-15);
  other.dispose();
});

test("entries at the same place add up, zeros and a row of them are taken as they are", () => {
  // Rows (1 + 2, 0), (0, 0), (1, 1): JᵀJ = [10 1; 1 1].
  const jacobian = { rows: 3, columns: 2, columnPointers: [0, 4, 7], rowIndices: [0, 2, 0, 1, 2, 1, 0], values: [1, 1, 2, 0, 1, 0, 0] };
  for (const route of ["orthogonal", "information"] as const) {
    const { factor, solution } = leastSquares(jacobian, [3, 7, 2], { route });
    for (const [k, v] of [1, -1, -1, 10].entries()) expect(Math.abs(factor.inverseBlock([0, 1])[k]! - v / 9)).toBeLessThan(1e-15);
    for (const v of solution) expect(Math.abs(v - 1)).toBeLessThan(1e-14);
    factor.dispose();
  }
});

test("an abort between slices rejects with its reason, and gives all memory back", async () => {
  const jacobian = byColumns(whitenedRows(families.net.make(3000)));
  const { used } = memoryUsage();
  for (const after of [1, 2]) {
    // analysis, elimination and condition take a slice each at least

    const abort = new AbortController();
    let slices = 0;
    const onProgress = () => {
      slices += 1;
      if (slices === after) abort.abort(new Error("enough"));
    };
    const error = await errorOf(() => factorizeRowsAsync(jacobian, { route: "orthogonal", signal: abort.signal, onProgress }));
    expect(error).toHaveProperty("message", "enough");
    expect(memoryUsage().used).toBe(used);
  }
});

test("numbers near both ends of f64's range keep their digits; no unknown at all is a factor too", () => {
  for (const size of [1e-130, 1e130]) {
    const factor = factorizeRows(jacobianOf([[3 * size, 0], [4 * size, 2], [0, 1]]), { route: "orthogonal" }); // biome-ignore format: a matrix
    // R = [5s 8/5; 0 √(5 − 64/25)]: variances (1 ÷ 25s²)(1 + 64/61), 25 ÷ 61.
    expect(Math.abs((factor.inverseBlock([0])[0]! * size * size * 61) / 5 - 1)).toBeLessThan(1e-15);
    expect(Math.abs((factor.inverseBlock([1])[0]! * 61) / 25 - 1)).toBeLessThan(1e-15);
    factor.dispose();
  }
  const empty = leastSquares({ rows: 0, columns: 0, columnPointers: [0], rowIndices: [], values: [] }, []);
  expect([empty.solution.length, empty.weightedSquares, empty.factor.order]).toEqual([0, 0, 0]);
  empty.factor.dispose();
});
