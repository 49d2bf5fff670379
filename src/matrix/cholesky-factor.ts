import { Handle } from "../../bindings/handle.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { bytesAvailable, copyFloats, withLoan, writeFloats } from "../../bindings/memory.js";
import { runSteps, runStepsInSlices, type SliceOptions, type Steps } from "../../bindings/slices.js";
import { BusyError, MemoryLimitError, NotPositiveDefiniteError, PatternMismatchError, RowFactorError } from "../errors.js";
import { finiteNumbersOf, indicesOf, requireIndex, requireKnownOptions, requireLength, requireWord } from "../support/checks.js";
import { requirePositiveDiagonal } from "./diagonal.js";
import { diagonalSteps, factorPatternSteps, matrixPatternSteps, squaredDiagonalSteps } from "./inverse-steps.js";
import type { KernelFactor } from "./kernel-factor.js";
import type { OrderingName } from "./options.js";
import { solveSteps } from "./solve-steps.js";
import { SymmetricMatrix } from "./symmetric-matrix.js";

/** What a factor is and what it cost. */
export interface FactorStatistics {
  /** Unknowns. */
  readonly order: number;
  /** Entries of L, its diagonal included. */
  readonly nonzeros: number;
  /** Multiplications and additions of the factorization: Σ over columns of L of (entries)². */
  readonly flops: number;
  readonly supernodes: number;
  /** Kernel memory that the factor holds. */
  readonly bytes: number;
  /** How the order of elimination was found. */
  readonly ordering: OrderingName;
  /** How measurement rows became the factor; left out when a matrix was given. */
  readonly rows?: RowStatistics;
}

/** By which way rows became a factor. */
export interface RowStatistics {
  /** `"information"`: Cholesky of JᵀWJ; `"orthogonal"`: Householder reflections of the rows. */
  readonly route: "information" | "orthogonal";
  /** Why that one, in a sentence. */
  readonly because: string;
  /** The estimate of the condition of JᵀWJ scaled to unit diagonal that the choice rests on; left out where none was made. */
  readonly condition?: number | undefined;
  /** Rows that were left out because their weight is zero, ascending. */
  readonly ignored: readonly number[];
}

/** Kernel objects that a factor takes over, and the pattern of its matrix. */
export interface FactorParts {
  pattern: Pattern;
  symbolic: number;
  factor: number;
  /** The matrix in kernel memory, and room for the values of the next one. */
  columnStart: number;
  rowIndex: number;
  values: number;
  spareValues: number;
  free: () => void;
  statistics: FactorStatistics;
}

type Pattern = Pick<SymmetricMatrix, "order" | "columnPointers" | "rowIndices">;

export interface InverseDiagonalOptions {
  /** `"selected"`, the default: by the selected inverse. `"squares"`: each entry as ‖L⁻¹e‖², in which nothing cancels: where the condition is bad it keeps
   *  digits that the other loses, at the cost of a forward solve over each unknown's path in the elimination tree. */
  method?: "selected" | "squares" | undefined;
}

export interface SelectedInverseOptions {
  /** `"factor"`, the default: all entries on the pattern of L; `"matrix"`: those on the matrix's own pattern. */
  pattern?: "factor" | "matrix" | undefined;
}

const LARGEST = 0x7fffffff;
const NAME = "CholeskyFactor";

/**
 * The factor of a symmetric positive definite matrix A, from `factorize`. All indices are in the caller's numbering; all results are
 * copies that stay good after later calls and after `dispose`. It owns kernel memory: call `dispose`, or declare it with `using`;
 * every method throws `DisposedError` after that.
 */
export class CholeskyFactor {
  /** Stays readable after `dispose`. */
  readonly statistics: FactorStatistics;
  readonly #factor: KernelFactor;
  readonly #pattern: Pattern;
  readonly #columnStart: number;
  readonly #rowIndex: number;
  #values: number;
  #spareValues: number;
  #diagonal: Float64Array | undefined;
  /** Asynchronous calls that read the factor now. */
  #readers = 0;

  /** @internal */
  constructor({ pattern, symbolic, factor, columnStart, rowIndex, values, spareValues, free, statistics }: FactorParts) {
    this.#pattern = pattern;
    this.#factor = { order: pattern.order, symbolic, handle: new Handle(this, NAME, factor, free) };
    this.#columnStart = columnStart;
    this.#rowIndex = rowIndex;
    this.#values = values;
    this.#spareValues = spareValues;
    this.statistics = Object.freeze(statistics);
  }

  /** Unknowns. */
  get order(): number {
    return this.#pattern.order;
  }

  /**
   * Solutions X of A X = B.
   * @param rhs B, order × columns, column-major.
   * @param columns right-hand sides, 1 by default.
   * @returns X, order × columns, column-major.
   * @throws {LengthError | NotFiniteError | IndexRangeError | MemoryLimitError}
   * Cost: 4 flops an entry of L and column; many columns together cost less each than one alone.
   */
  solve(rhs: ArrayLike<number>, columns = 1): Float64Array {
    const target = this.#rightHandSides(rhs, columns);
    runSteps(solveSteps(this.#factor, target));
    return target;
  }

  /** `solve` in slices; see `factorizeAsync` for signal and progress. `rhs` is copied before the first slice. */
  async solveAsync(rhs: ArrayLike<number>, columns = 1, options: SliceOptions = {}): Promise<Float64Array> {
    requireKnownOptions("solveAsync", options, ["signal", "onProgress"]);
    const target = this.#rightHandSides(rhs, columns);
    await this.#inSlices(solveSteps(this.#factor, target), options);
    return target;
  }

  #rightHandSides(rhs: ArrayLike<number>, columns: number): Float64Array {
    this.#factor.handle.address;
    requireIndex("columns", columns, 0, LARGEST);
    requireLength("rhs", rhs.length, this.order * columns);
    return finiteNumbersOf("rhs", rhs, (k) => ` (row ${k % this.order}, column ${Math.floor(k / this.order)})`);
  }

  /**
   * Columns of the inverse: `out[i + order · c] = A⁻¹[i, columns[c]]`.
   * @param columns each in [0, order); their order and repeats are kept.
   * @returns order × columns.length, column-major.
   * @throws {IndexRangeError | MemoryLimitError}
   * Cost: at most that of `solve`: the forward half touches only the unknown's path in the elimination tree (Gilbert, Peierls 1988).
   */
  inverseColumns(columns: ArrayLike<number>): Float64Array {
    this.#factor.handle.address;
    const units = indicesOf("columns", columns, 0, this.order - 1);
    const target = new Float64Array(this.order * units.length);
    runSteps(solveSteps(this.#factor, target, units));
    return target;
  }

  /**
   * Single entries of the inverse, anywhere: `out[k] = A⁻¹[rows[k], columns[k]]`.
   * @param rows each in [0, order); as many as columns.
   * @throws {LengthError | IndexRangeError | MemoryLimitError}
   * Cost: forward solves over the two unknowns' paths in the elimination tree; entries that share a column share work.
   */
  inverseEntries(rows: ArrayLike<number>, columns: ArrayLike<number>): Float64Array {
    const address = this.#factor.handle.address;
    requireLength("columns", columns.length, rows.length);
    const i = indicesOf("rows", rows, 0, this.order - 1);
    const j = indicesOf("columns", columns, 0, this.order - 1);
    const byColumn = Uint32Array.from(j.keys()).sort((a, b) => j[a]! - j[b]!); // the kernel wants equal columns side by side
    const what = "The workspace for entries of the inverse";
    const sorted = withLoan(what, (loan) => {
      const out = loan.room(8 * i.length);
      const rowsAt = loan.ints(Int32Array.from(byColumn, (k) => i[k]!));
      const columnsAt = loan.ints(Int32Array.from(byColumn, (k) => j[k]!));
      if (kernel().inverseEntries(address, rowsAt, columnsAt, i.length, out) !== status.ok)
        throw new MemoryLimitError(what, 16 * this.order, bytesAvailable());
      return copyFloats(out, i.length);
    });
    const result = new Float64Array(i.length);
    for (const [at, k] of byColumn.entries()) result[k] = sorted[at]!;
    return result;
  }

  /**
   * The inverse's block on chosen unknowns, such as one state's: `out[i · k + j] = A⁻¹[unknowns[i], unknowns[j]]`, k = unknowns.length. It is formed as
   * a square, YᵀY with Y = L⁻¹E, in which nothing cancels: where the condition is bad it keeps digits that `inverseDiagonal` and `selectedInverse` lose.
   * @param unknowns each in [0, order); their order and repeats are kept.
   * @throws {IndexRangeError | MemoryLimitError}
   * Cost: a forward solve with k columns over the unknowns' paths in the elimination tree.
   */
  inverseBlock(unknowns: ArrayLike<number>): Float64Array {
    const address = this.#factor.handle.address;
    const chosen = indicesOf("unknowns", unknowns, 0, this.order - 1);
    const count = chosen.length;
    const what = "The workspace for a block of the inverse";
    return withLoan(what, (loan) => {
      const out = loan.room(8 * count * count);
      if (kernel().inverseBlock(address, loan.ints(chosen), count, out) !== status.ok)
        throw new MemoryLimitError(what, 8 * count * this.order, bytesAvailable());
      return copyFloats(out, count * count);
    });
  }

  /**
   * The diagonal of the inverse: the variances when A is an information matrix, in (unit of the unknown)².
   * @param options method: `"selected"`, the default, or `"squares"`; see `InverseDiagonalOptions`.
   * @throws {MemoryLimitError | OptionError}
   * Cost: one selected inverse, about twice the factorization, the first time; a copy after. Source: Takahashi, Fagan, Chen (1973).
   */
  inverseDiagonal(options: InverseDiagonalOptions = {}): Float64Array {
    return runSteps(this.#diagonalSteps("inverseDiagonal", options, [])).slice();
  }

  /** `inverseDiagonal` in slices; see `factorizeAsync` for signal and progress. */
  async inverseDiagonalAsync(options: InverseDiagonalOptions & SliceOptions = {}): Promise<Float64Array> {
    const diagonal = await this.#inSlices(this.#diagonalSteps("inverseDiagonalAsync", options, ["signal", "onProgress"]), options);
    return diagonal.slice();
  }

  *#diagonalSteps(name: string, options: InverseDiagonalOptions, more: readonly string[]): Steps<Float64Array> {
    requireKnownOptions(name, options, ["method", ...more]);
    const { method = "selected" } = options;
    requireWord("method", method, ["selected", "squares"]);
    this.#factor.handle.address;
    if (method === "squares") return yield* squaredDiagonalSteps(this.#factor);
    this.#diagonal ??= yield* diagonalSteps(this.#factor);
    return this.#diagonal;
  }

  /**
   * The entries of the inverse on a pattern: that of L (a superset of the matrix's own), or the matrix's.
   * @throws {MemoryLimitError | OptionError}
   * Cost: about twice the factorization, each time. Sources: Takahashi, Fagan, Chen (1973); Erisman, Tinney (1975).
   */
  selectedInverse(options: SelectedInverseOptions = {}): SymmetricMatrix {
    return runSteps(this.#selectedSteps("selectedInverse", options, []));
  }

  /** `selectedInverse` in slices; see `factorizeAsync` for signal and progress. */
  async selectedInverseAsync(options: SelectedInverseOptions & SliceOptions = {}): Promise<SymmetricMatrix> {
    return this.#inSlices(this.#selectedSteps("selectedInverseAsync", options, ["signal", "onProgress"]), options);
  }

  *#selectedSteps(name: string, options: SelectedInverseOptions, more: readonly string[]): Steps<SymmetricMatrix> {
    requireKnownOptions(name, options, ["pattern", ...more]);
    const { pattern = "factor" } = options;
    requireWord("pattern", pattern, ["factor", "matrix"]);
    if (pattern === "factor") return SymmetricMatrix.adopt(yield* factorPatternSteps(this.#factor));
    const { order, columnPointers, rowIndices } = this.#pattern;
    const values = yield* matrixPatternSteps(this.#factor, rowIndices.length);
    return SymmetricMatrix.adopt({ order, columnPointers: columnPointers.slice(), rowIndices: rowIndices.slice(), values });
  }

  /** The natural logarithm of A's determinant; 0 for order 0. Cost: one logarithm an unknown. */
  logDeterminant(): number {
    return kernel().logDeterminant(this.#factor.handle.address);
  }

  /**
   * An estimate of 1 ÷ (‖A‖₁ ‖A⁻¹‖₁): how many of the sixteen digits the matrix leaves. Never below the true value, seldom above 3 times it;
   * 1 for order 0.
   * @throws {MemoryLimitError}
   * Cost: at most ten solves with two columns. Source: Higham, Tisseur (2000), SIAM J. Matrix Anal. Appl. 21.
   */
  reciprocalCondition(): number {
    const address = this.#factor.handle.address;
    if (this.order === 0) return 1;
    const result = kernel().reciprocalCondition(address, this.#columnStart, this.#rowIndex, this.#values);
    if (result < 0) throw new MemoryLimitError("The workspace of the condition estimate", 64 * this.order, bytesAvailable());
    return result;
  }

  /**
   * Factors another matrix with the same pattern in place of this one: no analysis, no allocation in the kernel.
   * @throws {PatternMismatchError | NotPositiveDefiniteError} the factor then still is that of the matrix before.
   * @throws {BusyError} while an asynchronous call reads the factor.
   * @throws {RowFactorError} on a factor that the orthogonal route made of rows.
   * Cost: the numeric factorization; twice that when it fails.
   */
  refactor(matrix: SymmetricMatrix): void {
    const k = kernel();
    const address = this.#factor.handle.address;
    if (this.#readers > 0) throw new BusyError(NAME);
    if (this.statistics.rows?.route === "orthogonal") throw new RowFactorError();
    requireSamePattern(this.#pattern, matrix);
    requirePositiveDiagonal(matrix);
    writeFloats(this.#spareValues, matrix.values);
    const failed = this.#run(this.#spareValues);
    if (failed > 0) {
      const pivot = k.factorPivot(address);
      this.#run(this.#values); // the same numbers in the same order give the factor that was
      throw new NotPositiveDefiniteError(failed - 1, pivot);
    }
    [this.#values, this.#spareValues] = [this.#spareValues, this.#values];
    this.#diagonal = undefined;
  }

  #run(values: number): number {
    const k = kernel();
    const { address } = this.#factor.handle;
    k.factorBegin(address, values);
    return runSteps(
      (function* (): Steps<number> {
        return yield { advance: (budget) => k.factorAdvance(address, budget), progress: () => k.factorProgress(address) };
      })(),
    );
  }

  async #inSlices<T>(steps: Steps<T>, options: SliceOptions): Promise<T> {
    this.#readers += 1;
    try {
      return await runStepsInSlices(steps, options);
    } finally {
      this.#readers -= 1;
    }
  }

  /** Frees the kernel memory. The second time it does nothing. An asynchronous call that is running rejects with `DisposedError`. */
  dispose(): void {
    this.#factor.handle.dispose();
    this.#diagonal = undefined;
  }

  [Symbol.dispose](): void {
    this.dispose();
  }
}

function requireSamePattern(pattern: Pattern, matrix: SymmetricMatrix): void {
  const { order, columnPointers, rowIndices } = matrix;
  if (order !== pattern.order)
    throw new PatternMismatchError(`The matrix has order ${order}, the factor ${pattern.order}`, { order, expected: pattern.order });
  if (columnPointers === pattern.columnPointers && rowIndices === pattern.rowIndices) return;
  for (let j = 0; j < order; j += 1) {
    const same =
      columnPointers[j + 1] === pattern.columnPointers[j + 1] &&
      rowIndices.subarray(columnPointers[j], columnPointers[j + 1]).every((row, k) => row === pattern.rowIndices[columnPointers[j]! + k]);
    if (!same)
      throw new PatternMismatchError(`Column ${j} has its entries at other rows than in the matrix that was factored`, { column: j });
  }
}
