// A matrix copied into the kernel, its pattern analysed, and room for its factor: what every route to the numbers starts from.
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, Loan, requireMemory } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import { analysisSteps } from "./analysis-steps.js";
import type { FactorParts } from "./cholesky-factor.js";
import type { LowerColumns } from "./compress.js";
import { type CheckedOptions, orderingName } from "./options.js";

/** The caller owns what it returns, and gives it to a CholeskyFactor or calls `free`.
 *  @throws {MemoryLimitError} before the numbers are started, with the bytes that the factor would take. */
export function* factorRoomSteps(matrix: LowerColumns, options: CheckedOptions): Steps<FactorParts> {
  const k = kernel();
  const { order, columnPointers, rowIndices } = matrix;
  const nonzeros = rowIndices.length;
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
    const columnStart = copies.ints(columnPointers);
    const rowIndex = copies.ints(rowIndices);
    const values = copies.floats(matrix.values);
    symbolic = yield* analysisSteps(order, columnStart, rowIndex, options);
    const bytes = k.factorBytes(symbolic) + 8 * nonzeros;
    requireMemory("The factor", bytes);
    const spareValues = copies.room(8 * nonzeros);
    factor = addressOrThrow("The factor", k.factorCreate(symbolic), bytes);
    complete = true;
    return {
      pattern: { order, columnPointers, rowIndices },
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
    };
  } finally {
    if (!complete) free();
  }
}

/** Cholesky of the copied values. 0, or 1 + the unknown whose pivot is not safely positive. */
export function* choleskySteps({ factor, values }: FactorParts, from: number, to: number): Steps<number> {
  const k = kernel();
  k.factorBegin(factor, values);
  return yield { advance: (budget) => k.factorAdvance(factor, budget), progress: () => k.factorProgress(factor), from, to };
}
