// Solutions for many right-hand sides, in groups that the kernel's panels are read for together.
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, Loan, readFloatsInto } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import type { KernelFactor } from "./kernel-factor.js";

/** Right-hand sides in kernel memory at once: the group of assembly/solve/solve.ts. */
const COLUMNS_AT_ONCE = 16;
const WHAT = "The solution";

/** Solves for the columns of `target` (order × columns, column-major) in place; with `units`, for the unit vectors of those unknowns. */
export function* solveSteps(factor: KernelFactor, target: Float64Array, units?: Int32Array): Steps<void> {
  const { order } = factor;
  const columns = order === 0 ? 0 : target.length / order;
  for (let first = 0; first < columns; first += COLUMNS_AT_ONCE) {
    const end = Math.min(first + COLUMNS_AT_ONCE, columns);
    yield* groupSteps(factor, target.subarray(order * first, order * end), units?.subarray(first, end), first / columns, end / columns);
  }
}

function* groupSteps(
  { order, handle }: KernelFactor,
  target: Float64Array,
  units: Int32Array | undefined,
  from: number,
  to: number,
): Steps<void> {
  const k = kernel();
  const loan = new Loan(WHAT);
  let job = 0;
  try {
    const address = loan.floats(target);
    const unitsAt = units ? loan.ints(units) : 0;
    job = addressOrThrow(WHAT, k.solveBegin(handle.address, address, target.length / order, unitsAt), 8 * target.length);
    yield {
      advance: (budget) => {
        handle.address;
        return k.solveAdvance(job, budget);
      },
      progress: () => k.solveProgress(job),
      from,
      to,
    };
    readFloatsInto(target, address);
  } finally {
    if (job) k.solveRelease(job);
    loan.giveBack();
  }
}
