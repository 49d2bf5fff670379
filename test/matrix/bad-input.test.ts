// One list of wrong calls × one check: the right error, naming the value and the place, the inputs and the factor as they were, and no
// kernel memory kept.
import { beforeAll, describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import {
  type CholeskyFactor,
  ColumnRangeError,
  EmptyColumnError,
  EmptyRowError,
  type FactorizeRowsOptions,
  factorize,
  factorizeAsync,
  factorizeRows,
  IndexRangeError,
  LengthError,
  leastSquares,
  MemoryLimitError,
  memoryUsage,
  NegativeWeightError,
  NotAPermutationError,
  NotFiniteError,
  NotPositiveDefiniteError,
  NotSymmetricError,
  OptionError,
  PatternMismatchError,
  RankDeficientError,
  SigmatideError,
  SymmetricMatrix,
  setMemoryLimit,
  TooFewRowsError,
  WrongTriangleError,
} from "../../src/index.js";
import { errorOf, initFacade, randomDominant } from "../support/facade.js";

const ORDER = 12;
let matrix: SymmetricMatrix;
let factor: CholeskyFactor;
beforeAll(async () => {
  await initFacade();
  matrix = randomDominant(ORDER, 2, random(5).uniform);
  factor = factorize(matrix);
});

const twoByTwo = { order: 2, columnPointers: [0, 2, 3], rowIndices: [0, 1, 1], values: [2, 1, 2] };
const jacobian = { rows: 3, columns: 2, columnPointers: [0, 2, 4], rowIndices: [0, 1, 1, 2], values: [1, 1, 1, 1] };
const ones = (length: number): number[] => new Array<number>(length).fill(1);
const withValue = (at: number, value: number): SymmetricMatrix =>
  SymmetricMatrix.fromColumns({ ...matrix, values: matrix.values.map((old, p) => (p === at ? value : old)) });
const indefinite = (): SymmetricMatrix => SymmetricMatrix.fromTriplets(3, [0, 1, 1, 2], [0, 0, 1, 2], [1, 2, 1, 1]);

interface WrongCall {
  call: () => unknown;
  error: new (...facts: never[]) => SigmatideError;
  details: Record<string, unknown>;
}
const { fromColumns, fromTriplets, fromNormalEquations } = {
  fromColumns: (change: object) => () => SymmetricMatrix.fromColumns({ ...twoByTwo, ...change }),
  fromTriplets:
    (order: number, rows: number[], columns: number[], values: number[], options = {}) =>
    () =>
      SymmetricMatrix.fromTriplets(order, rows, columns, values, options),
  fromNormalEquations: (change: object, weights?: number[]) => () =>
    SymmetricMatrix.fromNormalEquations({ ...jacobian, ...change }, weights),
};

const rowsCall =
  (change: object, options: FactorizeRowsOptions = {}) =>
  () =>
    factorizeRows({ ...jacobian, ...change }, options);

const wrongCalls: Record<string, WrongCall> = {
  "an order that is negative": { call: fromColumns({ order: -1 }), error: IndexRangeError, details: { what: "order", value: -1 } },
  "an order that is no whole number": { call: fromColumns({ order: 1.5 }), error: IndexRangeError, details: { value: 1.5 } },
  "too few column pointers": {
    call: fromColumns({ columnPointers: [0, 3] }),
    error: LengthError,
    details: { what: "the length of columnPointers", length: 2, expected: 3 },
  },
  "column pointers that do not start at 0": {
    call: fromColumns({ columnPointers: [1, 2, 3] }),
    error: IndexRangeError,
    details: { what: "columnPointers[0]", value: 1 },
  },
  "column pointers that fall": {
    call: fromColumns({ columnPointers: [0, 3, 2] }),
    error: IndexRangeError,
    details: { what: "columnPointers[2]", value: 2, lowest: 3 },
  },
  "column pointers that leave entries over": {
    call: fromColumns({ columnPointers: [0, 1, 2] }),
    error: IndexRangeError,
    details: { what: "columnPointers[2]", value: 2, lowest: 3 },
  },
  "values of another length": { call: fromColumns({ values: [1, 2] }), error: LengthError, details: { length: 2, expected: 3 } },
  "a row index past the order": {
    call: fromColumns({ rowIndices: [0, 2, 1] }),
    error: IndexRangeError,
    details: { what: "rowIndices[1]", value: 2, highest: 1 },
  },
  "a row index that is no number": {
    call: fromColumns({ rowIndices: [0, Number.NaN, 1] }),
    error: IndexRangeError,
    details: { what: "rowIndices[1]" },
  },
  "a fractional row index": { call: fromColumns({ rowIndices: [0, 0.5, 1] }), error: IndexRangeError, details: { value: 0.5 } },
  "a row index past 32 bits": { call: fromColumns({ rowIndices: [0, 2 ** 32, 1] }), error: IndexRangeError, details: { value: 2 ** 32 } },
  "NaN among the values": {
    call: fromColumns({ values: [1, Number.NaN, Number.POSITIVE_INFINITY] }),
    error: NotFiniteError,
    details: { what: "values", position: 1, value: Number.NaN },
  },
  "an entry above the diagonal": {
    call: fromColumns({ rowIndices: [0, 1, 0] }),
    error: WrongTriangleError,
    details: { position: 2, row: 0, column: 1, triangle: "lower" },
  },
  "an entry below the diagonal of an upper triangle": {
    call: fromTriplets(2, [0, 1], [0, 0], [1, 1], { triangle: "upper" }),
    error: WrongTriangleError,
    details: { position: 1, row: 1, column: 0, triangle: "upper" },
  },
  "halves that differ": {
    call: fromTriplets(2, [0, 1, 0, 1], [0, 0, 1, 1], [1, 0.5, 0.25, 1], { triangle: "full" }),
    error: NotSymmetricError,
    details: { row: 1, column: 0, value: 0.5, mirrored: 0.25 },
  },
  "a half that is missing": {
    call: fromTriplets(2, [0, 0, 1], [0, 1, 1], [1, 0.5, 1], { triangle: "full" }),
    error: NotSymmetricError,
    details: { row: 1, column: 0, value: 0, mirrored: 0.5 },
  },
  "a triangle that does not exist": {
    call: fromTriplets(1, [0], [0], [1], { triangle: "uper" }),
    error: OptionError,
    details: { option: "triangle", value: "uper" },
  },
  "a misspelt option": { call: fromColumns({ trianle: "full" }), error: OptionError, details: { option: "trianle" } },
  "triplets of different lengths": {
    call: fromTriplets(2, [0, 1], [0], [1, 1]),
    error: LengthError,
    details: { length: 1, expected: 2 },
  },
  "an infinite triplet": {
    call: fromTriplets(2, [0, 1], [0, 1], [1, Number.NEGATIVE_INFINITY]),
    error: NotFiniteError,
    details: { position: 1 },
  },
  "a Jacobian's row index past its rows": {
    call: fromNormalEquations({ rows: 2 }),
    error: IndexRangeError,
    details: { what: "rowIndices[3]", value: 2 },
  },
  "too few weights": { call: fromNormalEquations({}, [1, 1]), error: LengthError, details: { what: "the length of weights", length: 2 } },
  "a negative weight": { call: fromNormalEquations({}, [1, -1, 1]), error: NegativeWeightError, details: { row: 1, weight: -1 } },
  "a weight that is NaN": { call: fromNormalEquations({}, [1, 1, Number.NaN]), error: NotFiniteError, details: { position: 2 } },

  "a column without an entry": {
    call: () => factorize(SymmetricMatrix.fromTriplets(3, [0, 2], [0, 2], [1, 1])),
    error: EmptyColumnError,
    details: { column: 1 },
  },
  "a column without a diagonal entry": {
    call: () => factorize(SymmetricMatrix.fromTriplets(2, [0, 1], [0, 0], [1, 1])),
    error: NotPositiveDefiniteError,
    details: { column: 1, pivot: 0 },
  },
  "a negative diagonal entry": {
    call: () => factorize(SymmetricMatrix.fromTriplets(2, [0, 1], [0, 1], [1, -3])),
    error: NotPositiveDefiniteError,
    details: { column: 1, pivot: -3 },
  },
  "an indefinite matrix": {
    call: () => factorize(indefinite(), { ordering: "natural" }),
    error: NotPositiveDefiniteError,
    details: { column: 1, pivot: -3 },
  },
  "an indefinite matrix in another order": {
    call: () => factorize(indefinite(), { ordering: [2, 1, 0] }),
    error: NotPositiveDefiniteError,
    details: { column: 0, pivot: -3 },
  },
  "an indefinite matrix in slices": {
    call: () => factorizeAsync(indefinite(), { ordering: "natural" }),
    error: NotPositiveDefiniteError,
    details: { column: 1, pivot: -3 },
  },
  "a misspelt ordering": {
    call: () => factorize(matrix, { ordering: "nested-disection" as "natural" }),
    error: OptionError,
    details: { option: "ordering", value: "nested-disection" },
  },
  "a misspelt option of factorize": {
    call: () => factorize(matrix, { orderng: "natural" } as object),
    error: OptionError,
    details: { option: "orderng" },
  },
  "an order that names an unknown twice": {
    call: () => factorize(matrix, { ordering: [...ones(ORDER).keys()].map((k) => (k === 7 ? 2 : k)) }),
    error: NotAPermutationError,
    details: { value: 2, first: 2, second: 7 },
  },
  "an order that is too short": { call: () => factorize(matrix, { ordering: [0, 1] }), error: LengthError, details: { length: 2 } },
  "block sizes that do not add up": {
    call: () => factorize(matrix, { blockSizes: [3, 3, 3] }),
    error: LengthError,
    details: { what: "the sum of blockSizes", length: 9, expected: ORDER },
  },
  "a block size of zero": {
    call: () => factorize(matrix, { blockSizes: [0, ORDER] }),
    error: IndexRangeError,
    details: { what: "blockSizes[0]", value: 0 },
  },

  "a right-hand side of another length": { call: () => factor.solve(ones(ORDER + 1)), error: LengthError, details: { expected: ORDER } },
  "NaN on the right-hand side": {
    call: () => factor.solve(ones(2 * ORDER).with(ORDER + 3, Number.NaN), 2),
    error: NotFiniteError,
    details: { what: "rhs", position: ORDER + 3 },
  },
  "a column of the inverse past the order": {
    call: () => factor.inverseColumns([0, ORDER]),
    error: IndexRangeError,
    details: { what: "columns[1]", value: ORDER },
  },
  "a negative row": { call: () => factor.inverseEntries([-1], [0]), error: IndexRangeError, details: { what: "rows[0]", value: -1 } },
  "rows and columns of different number": { call: () => factor.inverseEntries([0, 1], [0]), error: LengthError, details: { length: 1 } },
  "an unknown pattern": {
    call: () => factor.selectedInverse({ pattern: "factors" as "factor" }),
    error: OptionError,
    details: { option: "pattern" },
  },
  "a refactor with another order": {
    call: () => factor.refactor(SymmetricMatrix.fromColumns(twoByTwo)),
    error: PatternMismatchError,
    details: { order: 2, expected: ORDER },
  },
  "a refactor with another pattern": {
    call: () => factor.refactor(randomDominant(ORDER, 2, random(6).uniform)),
    error: PatternMismatchError,
    details: { column: 0 },
  },
  "a refactor with a negative diagonal entry": {
    call: () => factor.refactor(withValue(matrix.columnPointers[3]!, -1)),
    error: NotPositiveDefiniteError,
    details: { column: 3, pivot: -1 },
  },
  "a refactor that fails halfway": {
    call: () => factor.refactor(withValue(matrix.columnPointers[3]! + 1, 1e3)),
    error: NotPositiveDefiniteError,
    details: {},
  },
  "an unknown past the order in a block": {
    call: () => factor.inverseBlock([0, ORDER]),
    error: IndexRangeError,
    details: { what: "unknowns[1]", value: ORDER },
  },

  "a negative weight of a row": {
    call: rowsCall({}, { weights: [1, -2, 1] }),
    error: NegativeWeightError,
    details: { row: 1, weight: -2 },
  },
  "a weight of a row that is infinite": {
    call: rowsCall({}, { weights: [1, 1, Number.POSITIVE_INFINITY] }),
    error: NotFiniteError,
    details: { what: "weights", position: 2 },
  },
  "weights that are not one a row": { call: rowsCall({}, { weights: [1, 1] }), error: LengthError, details: { length: 2, expected: 3 } },
  "a route that does not exist": {
    call: rowsCall({}, { route: "orthogonl" as "orthogonal" }),
    error: OptionError,
    details: { option: "route", value: "orthogonl" },
  },
  "a row without an entry": { call: rowsCall({ rows: 4 }), error: EmptyRowError, details: { row: 3 } },
  "a column of the rows without an entry": {
    call: rowsCall({ columns: 3, columnPointers: [0, 2, 4, 4] }),
    error: EmptyColumnError,
    details: { column: 2 },
  },
  "a column that only rows of weight zero touch": {
    call: rowsCall({}, { weights: [0, 0, 1] }),
    error: EmptyColumnError,
    details: { column: 0 },
  },
  "more unknowns than rows": {
    call: rowsCall({ rows: 1, rowIndices: [0, 0], columnPointers: [0, 1, 2], values: [1, 1] }),
    error: TooFewRowsError,
    details: { rows: 1, columns: 2 },
  },
  "more unknowns than rows with a weight": {
    call: rowsCall({ rows: 2, rowIndices: [0, 1, 0, 1] }, { weights: [1, 0] }),
    error: TooFewRowsError,
    details: { rows: 1, columns: 2 },
  },
  "columns that are multiples of each other": {
    call: rowsCall({ rowIndices: [0, 1, 0, 1], rows: 2, values: [1, 3, 2, 6] }, { route: "orthogonal" }),
    error: RankDeficientError,
    details: {},
  },
  "a column of zeros": { call: rowsCall({ values: [1, 1, 0, 0] }), error: RankDeficientError, details: { column: 1, size: 0 } },
  "a column whose squares overflow": { call: rowsCall({ values: [1, 1, 1e200, 1] }), error: ColumnRangeError, details: { column: 1 } },
  "a weighted row that overflows": {
    call: rowsCall({ values: [1, 1e200, 1, 1] }, { weights: [1, 1e300, 1] }),
    error: NotFiniteError,
    details: { what: "√weight × value" },
  },
  "a right-hand side that is not one number a row": {
    call: () => leastSquares(jacobian, [1, 2]),
    error: LengthError,
    details: { length: 2, expected: 3 },
  },
  "NaN on the right-hand side of rows": {
    call: () => leastSquares(jacobian, [1, Number.NaN, 1]),
    error: NotFiniteError,
    details: { what: "residual", position: 1 },
  },
  "a memory limit that is no number": { call: () => setMemoryLimit(Number.NaN), error: IndexRangeError, details: { what: "bytes" } },
};

const snapshot = () => ({
  matrix: [matrix.columnPointers.slice(), matrix.rowIndices.slice(), matrix.values.slice()],
  solution: factor.solve(ones(ORDER)),
  diagonal: factor.selectedInverse().values,
  determinant: factor.logDeterminant(),
  bytes: memoryUsage().used,
});

describe("a wrong call is refused by name, and leaves everything as it was:", () => {
  for (const [name, { call, error, details }] of Object.entries(wrongCalls)) {
    test(name, async () => {
      const before = snapshot();
      const thrown = await errorOf(call);
      expect(thrown).toBeInstanceOf(error);
      expect(thrown).toBeInstanceOf(SigmatideError);
      const { code, message, details: found } = thrown as SigmatideError;
      expect(code).toMatch(/^[A-Z_]+$/);
      expect(found).toMatchObject(details);
      expect(structuredClone(found)).toEqual(found);
      const named = Object.values(details).filter((value) => typeof value === "number" && !Number.isNaN(value));
      for (const value of named) expect(message).toMatch(new RegExp(String(value).replace("-3", "-3(\\.000e\\+0)?")));
      expect(snapshot()).toEqual(before);
    });
  }
});

test("an unknown option is answered with the nearest one", async () => {
  expect(await errorOf(() => factorize(matrix, { orderng: 1 } as object))).toHaveProperty(
    "message",
    expect.stringMatching(/did you mean "ordering"/),
  );
  const misspelt = { ordering: "nested-disection" as "natural" };
  expect(await errorOf(() => factorize(matrix, misspelt))).toHaveProperty(
    "message",
    expect.stringMatching(/did you mean "nested-dissection"/),
  );
});

test("a factor past the memory limit is refused with the bytes predicted, before the numbers start", async () => {
  const large = randomDominant(400, 6, random(9).uniform);
  const trial = factorize(large);
  const { bytes } = trial.statistics;
  trial.dispose();
  const { used, limit } = memoryUsage();
  try {
    for (const share of [0.05, 0.2, 0.5, 0.8, 0.95]) {
      setMemoryLimit(Math.floor(used + share * bytes));
      for (const call of [() => factorize(large), () => factorizeAsync(large)]) {
        const error = await errorOf(call);
        expect(error).toBeInstanceOf(MemoryLimitError);
        const { bytesNeeded, bytesAvailable } = (error as MemoryLimitError).details as Record<string, number>;
        expect(bytesNeeded).toBeGreaterThan(0);
        expect(bytesAvailable).toBeGreaterThanOrEqual(0);
        expect(memoryUsage().used).toBe(used);
      }
    }
    const calls = [
      () => factor.selectedInverse(),
      () => factor.selectedInverse({ pattern: "matrix" }),
      () => factor.inverseDiagonal(),
      () => factor.inverseColumns([0, 1]),
      () => factor.inverseEntries([0], [5]),
      () => factor.solve(ones(12 * ORDER), 12),
      () => factor.reciprocalCondition(),
      () => factor.inverseBlock([0, 5]),
      () => factor.inverseDiagonal({ method: "squares" }),
      () => leastSquares(jacobian, [1, 2, 4], { route: "orthogonal" }).factor.dispose(),
      () => factorizeRows(jacobian).dispose(),
    ];
    // Each allocation of a call is refused in turn, until there is room for all of them.
    for (const call of calls) {
      for (let room = 0; ; room += 16) {
        setMemoryLimit(used + room);
        const error = await errorOf(call);
        expect(memoryUsage().used).toBe(used);
        if (error === undefined) break;
        expect(error).toBeInstanceOf(MemoryLimitError);
        expect(room).toBeLessThan(50_000);
      }
    }
  } finally {
    setMemoryLimit(limit);
  }
});

test("a factor past WebAssembly's 4 GiB is refused with the bytes predicted, though no limit was set", async () => {
  // An arrow with its point at the wrong end: in the natural order every entry of L fills in, order × (order + 1) ÷ 2 of them.
  const order = 35_000;
  const places = Int32Array.from({ length: 2 * order - 1 }, (_, k) => (k < order ? k : k - order + 1));
  const columns = places.map((place, k) => (k < order ? place : 0));
  const arrow = SymmetricMatrix.fromTriplets(
    order,
    places,
    columns,
    places.map((_, k) => (k < order ? order : 1)),
  );
  const { used } = memoryUsage();
  const error = await errorOf(() => factorize(arrow, { ordering: "natural" }));
  expect(error).toBeInstanceOf(MemoryLimitError);
  expect((error as MemoryLimitError).details).toMatchObject({ bytesNeeded: 4 * order * (order + 1) });
  expect(memoryUsage().used).toBe(used);
  const factor = factorize(arrow, { ordering: "minimum-degree" });
  expect(factor.statistics.nonzeros).toBe(2 * order - 1);
  factor.dispose();
});
