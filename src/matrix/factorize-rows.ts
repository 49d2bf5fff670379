// From measurement rows to a factor of JᵀWJ, by one of two routes, and to the least-squares solution.
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyFloats, Loan, requireMemory, withLoan } from "../../bindings/memory.js";
import { runSteps, runStepsInSlices, type SliceOptions, type Steps } from "../../bindings/slices.js";
import { ColumnRangeError, MemoryLimitError, NotPositiveDefiniteError, RankDeficientError } from "../errors.js";
import { finiteNumbersOf, requireKnownOptions, requireLength, requireWord } from "../support/checks.js";
import { ANALYSIS_SHARE } from "./analysis-steps.js";
import { CholeskyFactor, type FactorParts, type RowStatistics } from "./cholesky-factor.js";
import type { LowerColumns } from "./compress.js";
import { choleskySteps, factorRoomSteps } from "./factor-room.js";
import { normalEquations } from "./normal-equations.js";
import { type CheckedOptions, checkOptions, type FactorizeOptions, factorizeOptionNames } from "./options.js";
import { residualOf, transposedProduct } from "./refinement.js";
import { conditionText, LARGEST_LOSS, LARGEST_SQUARE, NO_DIGITS, type Route, routes } from "./routes.js";
import type { SparseColumns } from "./sparse-columns.js";
import { type WeightedRows, weightedRows } from "./weighted-rows.js";

export interface FactorizeRowsOptions extends FactorizeOptions {
  /** One over the variance of each row; all 1 by default. Rows of weight 0 are left out. */
  weights?: ArrayLike<number> | undefined;
  /** `"information"`: Cholesky of JᵀWJ, whose condition is the square of the rows'. `"orthogonal"`: reflections of the rows themselves, good as
   *  far as the rows are. `"automatic"`, the default: the first, unless the estimate of the condition says that it keeps fewer than eight digits. */
  route?: "automatic" | "information" | "orthogonal" | undefined;
}

export interface LeastSquaresOptions extends FactorizeRowsOptions {
  /** One step of refinement: the residual of the solution in double-double, and the correction that it asks for. False by default. */
  refine?: boolean | undefined;
}

export interface LeastSquares {
  /** x that minimizes ‖√W (b − J x)‖, one number a column. */
  readonly solution: Float64Array;
  /** The factor of JᵀWJ: dispose it after use. */
  readonly factor: CholeskyFactor;
  /** Σ wᵢ rᵢ² of the residual r = b − J x; over (rows − columns) it is the variance factor. */
  readonly weightedSquares: number;
}

/** A condition of JᵀWJ up to here is told well enough by its Cholesky factor, and far from that of rows without rank. */
const KNOWN_CONDITION = 1e12;

const optionNames = [...factorizeOptionNames, "weights", "route"];

/**
 * The factor of JᵀWJ for an elimination order that keeps it sparse, straight from the rows when their condition asks for it.
 * @param jacobian rows × columns; entries at the same place add up. It is copied.
 * @param options weights, route, ordering and blockSizes; see `FactorizeRowsOptions`. `factor.statistics.rows` tells the route taken, why, and
 *   the rows left out.
 * @throws {NegativeWeightError | NotFiniteError | LengthError | IndexRangeError | OptionError}
 * @throws {EmptyRowError | EmptyColumnError | TooFewRowsError | ColumnRangeError} before any work.
 * @throws {RankDeficientError} an unknown that the rows do not determine: its diagonal entry of R is below 16 × 2.2e-16 × the size of its column, or
 *   the condition of √W J with columns of norm 1 is about 3e14 or more.
 * @throws {NotPositiveDefiniteError} the same by the route `"information"`.
 * @throws {MemoryLimitError} before the numbers are started.
 * Cost: the factorization; the orthogonal route takes 2.5 to 5 times as long as Cholesky, and `"automatic"` tries Cholesky first.
 * Sources: assembly/factor/orthogonal.ts names them; the choice: van der Sluis (1969), Numer. Math. 14.
 */
export function factorizeRows(jacobian: SparseColumns, options: FactorizeRowsOptions = {}): CholeskyFactor {
  return runSteps(rowSteps(checkRows("factorizeRows", jacobian, options, []))).factor;
}

/** `factorizeRows` in slices; see `factorizeAsync` for signal and progress. Everything is copied before the first slice. */
export async function factorizeRowsAsync(
  jacobian: SparseColumns,
  options: FactorizeRowsOptions & SliceOptions = {},
): Promise<CholeskyFactor> {
  const { factor } = await runStepsInSlices(
    rowSteps(checkRows("factorizeRowsAsync", jacobian, options, ["signal", "onProgress"])),
    options,
  );
  return factor;
}

/**
 * The least-squares solution of J x ≈ b with its factor. By the orthogonal route b goes through the same reflections as the rows, so that no
 * normal equations enter; by the other one they are solved.
 * @param residual b, one number a row: measured minus predicted. Those of rows of weight 0 are left out.
 * @param options as `factorizeRows`; refine.
 * @throws as `factorizeRows`.
 * Cost: that of `factorizeRows` and two solves; `refine` adds two more and about 50 flops an entry of J.
 * Sources: Golub (1965), Numer. Math. 7; refinement: Björck (1967), "Iterative refinement of linear least squares solutions I", BIT 7, in the form with
 * the factor alone of Björck (1987), "Stability analysis of the method of seminormal equations", Linear Algebra Appl. 88/89.
 */
export function leastSquares(jacobian: SparseColumns, residual: ArrayLike<number>, options: LeastSquaresOptions = {}): LeastSquares {
  const checked = checkRows("leastSquares", jacobian, options, ["refine"]);
  const { rows } = checked;
  requireLength("residual", residual.length, rows.jacobian.rows);
  const b = finiteNumbersOf("residual", residual);
  const { factor, solution: found } = runSteps(rowSteps(checked, b));
  let complete = false;
  try {
    const corrected = (x: Float64Array): Float64Array => factor.solve(transposedProduct(rows, residualOf(rows, b, x)));
    let solution = found ?? corrected(new Float64Array(factor.order));
    if (options.refine) {
      const correction = corrected(solution);
      solution = solution.map((x, j) => x + correction[j]!);
    }
    const { high } = residualOf(rows, b, solution);
    let weightedSquares = 0;
    for (const r of rows.kept) weightedSquares += rows.weights[r]! * high[r]! * high[r]!;
    complete = true;
    return { solution, factor, weightedSquares };
  } finally {
    if (!complete) factor.dispose();
  }
}

interface CheckedRows {
  readonly rows: WeightedRows;
  readonly options: CheckedOptions;
  readonly route: Route;
}

function checkRows(of: string, jacobian: SparseColumns, options: LeastSquaresOptions, more: readonly string[]): CheckedRows {
  requireKnownOptions(of, options, [...optionNames, ...more]);
  const { weights, route = "automatic" } = options;
  requireWord("route", route, routes);
  const rows = weightedRows(jacobian, weights);
  const { ordering, blockSizes } = options;
  return { rows, options: checkOptions(rows.jacobian.columns, { ordering, blockSizes }, of, factorizeOptionNames), route };
}

interface RowFactor {
  readonly factor: CholeskyFactor;
  /** By the orthogonal route, when a right-hand side was given. */
  readonly solution?: Float64Array | undefined;
}

function* rowSteps({ rows, options, route }: CheckedRows, residual?: Float64Array): Steps<RowFactor> {
  const matrix = normalEquations(rows.jacobian, rows.weights);
  const squares = squaresOf(matrix, rows);
  const room = yield* factorRoomSteps(matrix, options);
  let complete = false;
  try {
    const finish = (by: RowStatistics["route"], because: string, condition?: number): CholeskyFactor => {
      complete = true;
      return new CholeskyFactor({
        ...room,
        statistics: { ...room.statistics, rows: { route: by, because, condition, ignored: rows.ignored } },
      });
    };
    if (route === "information") {
      yield* informationSteps(room, 1);
      return { factor: finish("information", "the information route was asked for") };
    }
    const share = route === "automatic" ? (1 + ANALYSIS_SHARE) / 2 : ANALYSIS_SHARE;
    const condition = route === "automatic" ? yield* conditionSteps(room, squares, share) : undefined;
    if (condition !== undefined && condition * Number.EPSILON <= LARGEST_LOSS)
      return { factor: finish("information", `${conditionText(condition)}, which leaves digits enough`, condition) };
    const solution = yield* orthogonalSteps(room, rows, residual, squares, share);
    if (condition === undefined || condition > KNOWN_CONDITION) yield* determinedSteps(room, squares);
    const because =
      route === "orthogonal"
        ? "the orthogonal route was asked for"
        : condition === undefined
          ? "JᵀWJ is not safely positive definite in f64"
          : `${conditionText(condition)}, which costs too many digits`;
    return { factor: finish("orthogonal", because, condition), solution };
  } finally {
    if (!complete) room.free();
  }
}

/** Cholesky of the matrix.  @throws {NotPositiveDefiniteError} */
function* informationSteps(room: FactorParts, to: number): Steps<void> {
  const failed = yield* choleskySteps(room, ANALYSIS_SHARE, to);
  if (failed > 0) throw new NotPositiveDefiniteError(failed - 1, kernel().factorPivot(room.factor));
}

/** The condition of the matrix scaled to unit diagonal, by way of its Cholesky factor; undefined when that cannot be had. */
function* conditionSteps(room: FactorParts, squares: Float64Array, to: number): Steps<number | undefined> {
  const failed = yield* choleskySteps(room, ANALYSIS_SHARE, to);
  return failed > 0 ? undefined : yield* scaledConditionSteps(room, squares, to);
}

/** Of the matrix scaled to unit diagonal, by the factor at hand. */
function* scaledConditionSteps({ pattern, factor }: FactorParts, squares: Float64Array, at: number): Steps<number> {
  const k = kernel();
  const what = "The condition estimate";
  const loan = new Loan(what);
  let job = 0;
  try {
    job = addressOrThrow(what, k.scaledConditionBegin(factor, loan.floats(squares)), 64 * pattern.order);
    yield { advance: (budget) => k.scaledConditionAdvance(job, budget), progress: () => k.scaledConditionProgress(job), from: at, to: at };
    return k.scaledConditionResult(job);
  } finally {
    if (job) k.scaledConditionRelease(job);
    loan.giveBack();
  }
}

/** The rows' own condition, columns scaled to norm 1, is the root of the matrix's.  @throws {RankDeficientError} when rounding the rows could
 *  leave an unknown free, naming the one of which the least is left. */
function* determinedSteps(room: FactorParts, squares: Float64Array): Steps<void> {
  const condition = yield* scaledConditionSteps(room, squares, 1);
  if (Math.sqrt(condition) * Number.EPSILON < NO_DIGITS) return;
  const k = kernel();
  withLoan("The pivots", (loan) => {
    const address = loan.floats(squares);
    const unknown = k.weakestUnknown(room.factor, address);
    const size = Math.sqrt(squares[unknown]!);
    throw new RankDeficientError(unknown, size / Math.sqrt(k.pivotSpread(room.factor, address)), size);
  });
}

/** The diagonal of JᵀWJ: the squared norms of the columns of √W J.
 *  @throws {RankDeficientError} a column of zeros.  @throws {ColumnRangeError} one whose products with others f64 could not hold. */
function squaresOf({ order, columnPointers, values }: LowerColumns, { jacobian }: WeightedRows): Float64Array {
  const squares = Float64Array.from({ length: order }, (_, j) => values[columnPointers[j]!]!);
  for (const [j, square] of squares.entries()) {
    if (square >= 1 / LARGEST_SQUARE && square <= LARGEST_SQUARE) continue;
    if (jacobian.values.subarray(jacobian.columnPointers[j], jacobian.columnPointers[j + 1]).every((v) => v === 0))
      throw new RankDeficientError(j, 0, 0);
    throw new ColumnRangeError(j, square);
  }
  return squares;
}

/** Fills the factor from the rows. @returns the least-squares solution when there is a right-hand side. */
function* orthogonalSteps(
  { pattern: { order }, symbolic, factor }: FactorParts,
  { kept, weights, rowPointers, columnIndices, values }: WeightedRows,
  residual: Float64Array | undefined,
  squares: Float64Array,
  from: number,
): Steps<Float64Array | undefined> {
  const k = kernel();
  const what = "The orthogonal elimination";
  const loan = new Loan(what);
  let plan = 0;
  let job = 0;
  try {
    const rowStart = loan.ints(rowPointers);
    const column = loan.ints(columnIndices);
    const numbers = loan.floats(values);
    const right = residual ? loan.floats(Float64Array.from(kept, (r) => residual[r]! * Math.sqrt(weights[r]!))) : 0;
    plan = addressOrThrow(what, k.rowPlanCreate(symbolic, kept.length, rowStart, column), 8 * (kept.length + order));
    const bytes = k.orthogonalBytes(plan);
    requireMemory(what, bytes);
    job = addressOrThrow(what, k.orthogonalBegin(factor, plan, numbers, right, loan.floats(squares)), bytes);
    const failed = yield { advance: (budget) => k.orthogonalAdvance(job, budget), progress: () => k.orthogonalProgress(job), from, to: 1 };
    if (failed > 0) throw new RankDeficientError(failed - 1, k.orthogonalPivot(job), Math.sqrt(squares[failed - 1]!));
    if (!right) return undefined;
    const out = loan.room(8 * order);
    if (k.orthogonalSolution(job, out) !== status.ok) throw new MemoryLimitError(what, 8 * order, bytesAvailable());
    return copyFloats(out, order);
  } finally {
    if (job) k.orthogonalRelease(job);
    if (plan) k.rowPlanRelease(plan);
    loan.giveBack();
  }
}
