import { EmptyColumnError, NotPositiveDefiniteError } from "../errors.js";
import type { LowerColumns } from "./compress.js";

/** Every unknown has a positive diagonal entry: the first thing a positive definite matrix must have, told before any work. */
export function requirePositiveDiagonal({ order, columnPointers, rowIndices, values }: LowerColumns): void {
  for (let j = 0; j < order; j += 1) {
    const p = columnPointers[j]!;
    const isEmpty = p === columnPointers[j + 1]!;
    const hasDiagonal = !isEmpty && rowIndices[p] === j;
    if (hasDiagonal && values[p]! > 0) continue;
    if (isEmpty && !rowIndices.includes(j)) throw new EmptyColumnError(j);
    throw new NotPositiveDefiniteError(j, hasDiagonal ? values[p]! : 0);
  }
}
