// The analysis of a pattern as a long call.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, Loan } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import type { CheckedOptions } from "./options.js";

/** Share of progress that the analysis of the pattern takes: it runs before the work of the numbers can be predicted. */
export const ANALYSIS_SHARE = 0.25;

/** Analyses the pattern; the caller releases the symbolic object whose address this returns. */
export function* analysisSteps(order: number, columnStart: number, rowIndex: number, options: CheckedOptions): Steps<number> {
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
