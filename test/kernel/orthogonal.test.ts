// The orthogonal elimination by raw calls, on any build: random rows against a dense library, cut into slices of any size.
import fc from "fast-check";
import { Matrix, QrDecomposition } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { floatsAt, intoKernel } from "../support/arrays.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";
import { lowerFrom, Pipeline, randomFrom } from "../support/pipeline.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

interface RandomRows {
  n: number;
  columns: number[][];
  values: number[][];
  right: number[];
}

/** Rows on one to three unknowns each: one on every unknown alone, ties at random. */
function randomRows(seed: number, n: number, ties: number): RandomRows {
  const random = randomFrom(seed);
  const columns = [...upTo(n).map((j) => [j]), ...upTo(ties).map(() => [...new Set(upTo(3).map(() => Math.floor(n * random())))])];
  return {
    n,
    columns,
    values: columns.map((row) => row.map(() => 2 * random() - 1 + Math.sign(random() - 0.5))),
    right: columns.map(() => 2 * random() - 1),
  };
}

/** JᵀJ, lower triangle by columns. */
function normalMatrix({ n, columns, values }: RandomRows) {
  const sums = new Map<number, number>();
  for (const [r, row] of columns.entries())
    for (const [a, i] of row.entries())
      for (const [b, j] of row.entries()) if (i >= j) sums.set(j * n + i, (sums.get(j * n + i) ?? 0) + values[r]![a]! * values[r]![b]!);
  return lowerFrom(n, sums);
}

/** Squared norms of the columns. */
function squaresOf(columns: readonly (readonly number[])[], values: readonly (readonly number[])[], n: number): Float64Array {
  const squares = new Float64Array(n);
  for (const [r, row] of columns.entries()) for (const [k, j] of row.entries()) squares[j]! += values[r]![k]! ** 2;
  return squares;
}

/** Plans, runs in slices of `budget` with progress that never falls, and gives the status and the solution. */
function eliminate(
  pipeline: Pipeline,
  { n, columns, values, right }: RandomRows,
  budget: number,
  withRight = true,
  mostBytes = Number.POSITIVE_INFINITY,
) {
  const { raw } = kernel;
  const rowStart = new Int32Array(columns.length + 1);
  for (const [r, row] of columns.entries()) rowStart[r + 1] = rowStart[r]! + row.length;
  const blocks = [
    intoKernel(kernel, rowStart),
    intoKernel(kernel, Int32Array.from(columns.flat())),
    intoKernel(kernel, Float64Array.from(values.flat())),
    intoKernel(kernel, Float64Array.from(right)),
    intoKernel(kernel, new Float64Array(n)),
    intoKernel(kernel, squaresOf(columns, values, n)),
  ] as const;
  const plan = raw.rowPlanCreate!(pipeline.symbolic, columns.length, blocks[0], blocks[1]);
  const before = raw.memoryUsed!();
  const job = raw.orthogonalBegin!(pipeline.factor, plan, blocks[2], withRight ? blocks[3] : 0, blocks[5]);
  // Block headers and roundings come on top: at most 64 bytes for each of the eight blocks.
  expect(raw.memoryUsed!() - before).toBeLessThanOrEqual(raw.orthogonalBytes!(plan) + 512);
  expect(raw.orthogonalBytes!(plan)).toBeLessThanOrEqual(mostBytes);
  let last = 0;
  let status = -1;
  for (; status === -1; ) {
    status = raw.orthogonalAdvance!(job, budget);
    const progress = raw.orthogonalProgress!(job);
    expect(progress).toBeGreaterThanOrEqual(last);
    expect(progress).toBeLessThanOrEqual(1);
    last = progress;
  }
  if (status === 0 && withRight) expect(raw.orthogonalSolution!(job, blocks[4])).toBe(0);
  const solution = floatsAt(kernel, blocks[4], n);
  const pivot = raw.orthogonalPivot!(job);
  raw.orthogonalRelease!(job);
  raw.rowPlanRelease!(plan);
  for (const block of blocks) raw.release!(block);
  return { status, solution, pivot };
}

test("random rows: the factor inverts JᵀJ and the solution is a dense library's, in every order and slice; memory goes back", () => {
  const before = kernel.raw.memoryUsed!();
  fc.assert(
    fc.property(
      fc.record({
        seed: fc.integer({ min: 1, max: 2 ** 30 }),
        n: fc.integer({ min: 1, max: 60 }),
        density: fc.double({ min: 0, max: 4, noNaN: true }),
        ordering: fc.integer({ min: 0, max: 3 }),
        budget: fc.constantFrom(1, 500, Number.POSITIVE_INFINITY),
      }),
      ({ seed, n, density, ordering, budget }) => {
        const rows = randomRows(seed, n, Math.floor(density * n));
        const pipeline = new Pipeline(kernel, normalMatrix(rows), { ordering });
        const dense = Matrix.zeros(rows.columns.length, n);
        for (const [r, row] of rows.columns.entries()) for (const [k, j] of row.entries()) dense.set(r, j, rows.values[r]![k]!);
        const qr = new QrDecomposition(dense);
        const triangle = qr.upperTriangularMatrix;
        const condition = triangle.norm() * new QrDecomposition(triangle).solve(Matrix.eye(n)).norm();
        const inverse = new QrDecomposition(triangle).solve(new QrDecomposition(triangle.transpose()).solve(Matrix.eye(n)));
        const { status, solution } = eliminate(pipeline, rows, budget);
        expect(status).toBe(0);
        // Both are backward stable: c m n u κ for a solution with its residual, twice that for a variance (Higham, chapters 19 and 20); c = 10.
        const bound = 10 * rows.columns.length * n * Number.EPSILON * condition;
        const expected = qr.solve(Matrix.columnVector(rows.right));
        const size = expected.norm() + Math.hypot(...rows.right) * inverse.norm() ** 0.5;
        for (let j = 0; j < n; j += 1)
          expect(Math.abs(solution[j]! - expected.get(j, 0))).toBeLessThanOrEqual(bound * condition ** 0.5 * size);
        const { diagonal } = pipeline.selectedInverse();
        for (let j = 0; j < n; j += 1) expect(Math.abs(diagonal[j]! - inverse.get(j, j))).toBeLessThanOrEqual(2 * bound * inverse.norm());
        const logDeterminant = 2 * upTo(n).reduce((sum, j) => sum + Math.log(Math.abs(triangle.get(j, j))), 0);
        expect(Math.abs(pipeline.logDeterminant() - logDeterminant)).toBeLessThanOrEqual(bound);

        // Without a right-hand side, and at once, the same bits.
        eliminate(pipeline, rows, Number.POSITIVE_INFINITY, false);
        expect(pipeline.selectedInverse().diagonal).toEqual(diagonal);
        pipeline.release();
      },
    ),
    { numRuns: 150 },
  );
  expect(kernel.raw.memoryUsed!()).toBe(before);
});

test("many rows on few unknowns, and fronts cut into slices inside", () => {
  const random = randomFrom(77);
  for (const [m, n] of [
    [500, 3],
    [600, 150],
  ] as const) {
    const rows: RandomRows = {
      n,
      columns: upTo(m).map(() => upTo(n)),
      values: upTo(m).map(() => upTo(n).map(() => 2 * random() - 1)),
      right: upTo(m).map(() => 2 * random() - 1),
    };
    const pipeline = new Pipeline(kernel, normalMatrix(rows));
    const whole = eliminate(pipeline, rows, Number.POSITIVE_INFINITY);
    const sliced = eliminate(pipeline, rows, 1000);
    expect(sliced).toEqual(whole);
    const expected = new QrDecomposition(new Matrix(rows.values)).solve(Matrix.columnVector(rows.right));
    for (let j = 0; j < n; j += 1) expect(Math.abs(whole.solution[j]! - expected.get(j, 0))).toBeLessThan(1e-11);
    pipeline.release();
  }
});

test("the same few things measured very often: rows go through in lots, the front stays small, and children's rows come with the first", () => {
  const once = randomRows(21, 24, 40);
  const random = randomFrom(22);
  const again = (row: readonly number[]) => row.map((v) => v + 0.1 * (2 * random() - 1));
  const times = 60;
  const rows: RandomRows = {
    n: once.n,
    columns: upTo(times).flatMap(() => once.columns),
    values: upTo(times).flatMap(() => once.values.map(again)),
    right: upTo(times).flatMap(() => again(once.right)),
  };
  const pipeline = new Pipeline(kernel, normalMatrix(rows));
  const { solution } = eliminate(pipeline, rows, 3000);
  const dense = Matrix.zeros(rows.columns.length, rows.n);
  for (const [r, row] of rows.columns.entries()) for (const [k, j] of row.entries()) dense.set(r, j, rows.values[r]![k]!);
  const expected = new QrDecomposition(dense).solve(Matrix.columnVector(rows.right));
  for (let j = 0; j < rows.n; j += 1) expect(Math.abs(solution[j]! - expected.get(j, 0))).toBeLessThan(1e-12);
  pipeline.release();

  // 20 000 rows on three unknowns: no more than 259 of them in the front at once.
  const tall: RandomRows = {
    n: 3,
    columns: upTo(20_000).map(() => [0, 1, 2]),
    values: upTo(20_000).map(() => upTo(3).map(() => 2 * random() - 1)),
    right: upTo(20_000).map(() => 1),
  };
  const small = new Pipeline(kernel, normalMatrix(tall));
  eliminate(small, tall, Number.POSITIVE_INFINITY, false, 40_000);
  // The diagonal of the inverse of about (20 000 ÷ 3) I: its first value by the sums themselves.
  const { diagonal } = small.selectedInverse();
  const gram = new Matrix(upTo(3).map((i) => upTo(3).map((j) => tall.values.reduce((sum, row) => sum + row[i]! * row[j]!, 0))));
  const inverse = new QrDecomposition(gram).solve(Matrix.eye(3));
  for (const j of upTo(3)) expect(Math.abs(diagonal[j]! / inverse.get(j, j) - 1)).toBeLessThan(1e-11);
  small.release();
});

test("an unknown that the rows leave free stops the elimination with its number; good rows then succeed", () => {
  const rows = randomRows(9, 12, 30);
  const pipeline = new Pipeline(kernel, normalMatrix(rows), { ordering: 3 });
  const broken = { ...rows, values: rows.values.map((row, r) => row.map((v, k) => (rows.columns[r]![k] === 7 ? 0 : v))) };
  const { status, pivot } = eliminate(pipeline, broken, 200);
  expect(status).toBe(8);
  expect(pivot).toBe(0);
  expect(eliminate(pipeline, rows, 200).status).toBe(0);
  pipeline.release();
});

test("memory that is refused at any of its blocks is a status, and nothing is kept", () => {
  const { raw } = kernel;
  const rows = randomRows(4, 20, 40);
  const pipeline = new Pipeline(kernel, normalMatrix(rows));
  const rowStart = intoKernel(
    kernel,
    Int32Array.from({ length: rows.columns.length + 1 }, (_, r) => rows.columns.slice(0, r).flat().length),
  );
  const columns = Int32Array.from(rows.columns.flat());
  const column = intoKernel(kernel, columns);
  const values = intoKernel(kernel, Float64Array.from(rows.values.flat()));
  const squares = intoKernel(kernel, squaresOf(rows.columns, rows.values, 20));
  const limit = raw.memoryLimit!();
  const used = raw.memoryUsed!();
  let [refused, done] = [0, false];
  for (let room = 0; !done; room += 48) {
    raw.setMemoryLimit!(used + room);
    new Int32Array(kernel.memory.buffer, column, columns.length).set(columns);
    const plan = raw.rowPlanCreate!(pipeline.symbolic, rows.columns.length, rowStart, column);
    const job = plan ? raw.orthogonalBegin!(pipeline.factor, plan, values, 0, squares) : 0;
    done = job !== 0;
    if (job) raw.orthogonalRelease!(job);
    else refused += 1;
    if (plan) raw.rowPlanRelease!(plan);
    expect(raw.memoryUsed!()).toBe(used);
  }
  expect(refused).toBeGreaterThan(10);
  raw.setMemoryLimit!(limit);
  for (const block of [rowStart, column, values, squares]) raw.release!(block);
  pipeline.release();
});
