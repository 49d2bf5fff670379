// From a matrix to its factor.
import { kernel } from "../../bindings/loader.js";
import { runSteps, runStepsInSlices, type SliceOptions, type Steps } from "../../bindings/slices.js";
import { NotPositiveDefiniteError } from "../errors.js";
import { ANALYSIS_SHARE } from "./analysis-steps.js";
import { CholeskyFactor } from "./cholesky-factor.js";
import { requirePositiveDiagonal } from "./diagonal.js";
import { choleskySteps, factorRoomSteps } from "./factor-room.js";
import { type CheckedOptions, checkOptions, type FactorizeOptions, factorizeOptionNames } from "./options.js";
import type { SymmetricMatrix } from "./symmetric-matrix.js";

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
  requirePositiveDiagonal(matrix);
  const room = yield* factorRoomSteps(matrix, options);
  let complete = false;
  try {
    const failed = yield* choleskySteps(room, ANALYSIS_SHARE, 1);
    if (failed > 0) throw new NotPositiveDefiniteError(failed - 1, kernel().factorPivot(room.factor));
    complete = true;
    return new CholeskyFactor(room);
  } finally {
    if (!complete) room.free();
  }
}
