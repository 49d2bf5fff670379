// The selected inverse: its diagonal alone, or its entries on a pattern.
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyFloats, copyInts, Loan, requireMemory, withLoan } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import { MemoryLimitError } from "../errors.js";
import type { LowerColumns } from "./compress.js";
import type { KernelFactor } from "./kernel-factor.js";

const WHAT = "The selected inverse";
const WHAT_SQUARES = "The workspace for the diagonal of the inverse";

/** Runs the selected inverse, then `read` on its address while it is in memory. */
function* selectedSteps<T>({ handle, symbolic }: KernelFactor, keepPanels: 0 | 1, read: (inverse: number) => T): Steps<T> {
  const k = kernel();
  const factor = handle.address;
  const bytes = k.inverseBytes(symbolic, keepPanels);
  requireMemory(WHAT, bytes);
  const inverse = addressOrThrow(WHAT, k.inverseBegin(factor, keepPanels), bytes);
  try {
    yield {
      advance: (budget) => {
        handle.address;
        return k.inverseAdvance(inverse, budget);
      },
      progress: () => k.inverseProgress(inverse),
    };
    return read(inverse);
  } finally {
    k.inverseRelease(inverse);
  }
}

/** The diagonal of the inverse, caller's numbering. */
export function diagonalSteps(factor: KernelFactor): Steps<Float64Array> {
  return selectedSteps(factor, 0, (inverse) => copyFloats(kernel().inverseDiagonal(inverse) >>> 0, factor.order));
}

/** The same as sums of squares. */
export function* squaredDiagonalSteps({ handle, order }: KernelFactor): Steps<Float64Array> {
  const k = kernel();
  const loan = new Loan(WHAT_SQUARES);
  let job = 0;
  try {
    const diagonal = loan.room(8 * order);
    job = addressOrThrow(WHAT_SQUARES, k.squaresBegin(handle.address, diagonal), 128 * order);
    yield {
      advance: (budget) => {
        handle.address;
        return k.squaresAdvance(job, budget);
      },
      progress: () => k.squaresProgress(job),
    };
    return copyFloats(diagonal, order);
  } finally {
    if (job) k.squaresRelease(job);
    loan.giveBack();
  }
}

/** The inverse's entries at those of the factored matrix, in the same storage order. */
export function matrixPatternSteps(factor: KernelFactor, nonzeros: number): Steps<Float64Array> {
  return selectedSteps(factor, 1, (inverse) =>
    withLoan(WHAT, (loan) => {
      const out = loan.room(8 * nonzeros);
      kernel().inverseOnMatrix(inverse, out);
      return copyFloats(out, nonzeros);
    }),
  );
}

/** The inverse's entries on the pattern of L, caller's numbering. */
export function factorPatternSteps(factor: KernelFactor): Steps<LowerColumns> {
  const { order, symbolic } = factor;
  return selectedSteps(factor, 1, (inverse) =>
    withLoan(WHAT, (loan) => {
      const k = kernel();
      const entries = k.factorEntries(symbolic);
      const columnStart = loan.room(4 * (order + 1));
      const rowIndex = loan.room(4 * entries);
      const values = loan.room(8 * entries);
      if (k.inverseFactorColumns(inverse, columnStart, rowIndex, values) !== status.ok)
        throw new MemoryLimitError(WHAT, 8 * entries + 4 * (order + 1), bytesAvailable());
      return {
        order,
        columnPointers: copyInts(columnStart, order + 1),
        rowIndices: copyInts(rowIndex, entries),
        values: copyFloats(values, entries),
      };
    }),
  );
}
