// From a matrix to its factor: checks, analysis of the pattern, the memory it will take, numbers.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, Loan, requireMemory } from "../../bindings/memory.js";
import { runSteps, runStepsInSlices, type SliceOptions, type Steps } from "../../bindings/slices.js";
import { NotPositiveDefiniteError } from "../errors.js";
import { CholeskyFactor } from "./cholesky-factor.js";
import { requirePositiveDiagonal } from "./diagonal.js";
import { type CheckedOptions, checkOptions, type FactorizeOptions, factorizeOptionNames, orderingName } from "./options.js";
import type { SymmetricMatrix } from "./symmetric-matrix.js";

/** Share of progress that the analysis of the pattern takes: it runs before the work of the numbers can be predicted. */
const ANALYSIS_SHARE = 0.25;

/**
 * The Cholesky factor of a positive definite matrix: A[order, order] = L Lᵀ for an elimination order that keeps L sparse.
 * @param options ordering and blockSizes; see `FactorizeOptions`.
 * @throws {EmptyColumnError} an unknown that no entry touches.
 * @throws {NotPositiveDefiniteError} with the unknown, in the caller's numbering, and the pivot.
 * @throws {MemoryLimitError} before the numbers are started, with the bytes that the factor would take.
 * @throws {NotInitializedError | OptionError | IndexRangeError | LengthError | NotAPermutationError}
 * The matrix is copied and stays as it was. Order 0 has an empty factor. Dispose the factor after use.
 * Cost: `statistics.flops`, and O(nonzeros of L) memory. Source: Liu (1992), SIAM Review 34; the kernel's files name the rest.
 */
export function factorize(matrix: SymmetricMatrix, options: FactorizeOptions = {}): CholeskyFactor {
  return runSteps(factorSteps(matrix, checkOptions(matrix.order, options, "factorize", factorizeOptionNames)));
}

/**
 * `factorize` in slices of a few milliseconds, between which the thread's other work goes on.
 * @param options as `factorize`; signal: an abort stops at the next slice, gives all memory back and rejects with the signal's reason;
 *   onProgress: told fractions from 0 to 1, the first quarter for the pattern, the rest for the numbers, each work done ÷ work predicted.
 * @throws as `factorize`, by rejecting. The matrix is copied before the first slice.
 */
export async function factorizeAsync(matrix: SymmetricMatrix, options: FactorizeOptions & SliceOptions = {}): Promise<CholeskyFactor> {
  const names = [...factorizeOptionNames, "signal", "onProgress"];
  return runStepsInSlices(factorSteps(matrix, checkOptions(matrix.order, options, "factorizeAsync", names)), options);
}

function* factorSteps(matrix: SymmetricMatrix, options: CheckedOptions): Steps<CholeskyFactor> {
  const k = kernel();
  requirePositiveDiagonal(matrix);
  const { order, nonzeros } = matrix;
  const copies = new Loan("The copy of the matrix");
  let symbolic = 0;
  let factor = 0;
  const free = (): void => {
    if (factor) k.factorRelease(factor);
    if (symbolic) k.symbolicRelease(symbolic);
    copies.giveBack();
  };
  let complete = false;
  try {
    const columnStart = copies.ints(matrix.columnPointers);
    const rowIndex = copies.ints(matrix.rowIndices);
    const values = copies.floats(matrix.values);
    symbolic = yield* analysisSteps(order, columnStart, rowIndex, options);
    const bytes = k.factorBytes(symbolic) + 8 * nonzeros;
    requireMemory("The factor", bytes);
    const spareValues = copies.room(8 * nonzeros);
    factor = addressOrThrow("The factor", k.factorCreate(symbolic), bytes);
    k.factorBegin(factor, values);
    const result = yield {
      advance: (budget) => k.factorAdvance(factor, budget),
      progress: () => k.factorProgress(factor),
      from: ANALYSIS_SHARE,
      to: 1,
    };
    if (result > 0) throw new NotPositiveDefiniteError(result - 1, k.factorPivot(factor));
    complete = true;
    return new CholeskyFactor({
      matrix,
      symbolic,
      factor,
      columnStart,
      rowIndex,
      values,
      spareValues,
      free,
      statistics: {
        order,
        nonzeros: k.symbolicNonzeros(symbolic),
        flops: k.symbolicFlops(symbolic),
        supernodes: k.symbolicSupernodes(symbolic),
        bytes: k.symbolicBytes(symbolic) + bytes + 4 * (order + 1) + 12 * nonzeros,
        ordering: orderingName(k.symbolicOrdering(symbolic)),
      },
    });
  } finally {
    if (!complete) free();
  }
}

/** Analyses the pattern; the caller releases the symbolic object whose address this returns. */
function* analysisSteps(order: number, columnStart: number, rowIndex: number, options: CheckedOptions): Steps<number> {
  const k = kernel();
  const what = "The analysis of the pattern";
  const { code, givenOrder, blockSizes } = options;
  const input = new Loan(what);
  let job = 0;
  try {
    const sizes = blockSizes ? input.ints(blockSizes) : 0;
    const given = givenOrder ? input.ints(givenOrder) : 0;
    job = addressOrThrow(what, k.analysisBegin(order, columnStart, rowIndex, blockSizes?.length ?? 0, sizes, code, given, 0), 256);
    const result = yield {
      advance: (budget) => k.analysisAdvance(job, budget),
      progress: () => k.analysisProgress(job),
      from: 0,
      to: ANALYSIS_SHARE,
    };
    if (result === status.tooLarge) throw new MemoryLimitError("The factor", k.analysisFactorBytes(job), bytesAvailable());
    if (result === status.outOfMemory) throw new MemoryLimitError(what, 4 * order, bytesAvailable());
    return addressOrThrow(what, k.analysisFinish(job), 0);
  } finally {
    if (job) k.analysisRelease(job);
    input.giveBack();
  }
}
