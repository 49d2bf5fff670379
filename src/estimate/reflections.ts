// The factor of a base from the rows themselves, by orthogonal elimination, with the right-hand side carried along.
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, requireMemory } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import type { Singular } from "./base.js";

const LISTING_SHARE = 0.1;

export interface Reflected {
  /** Multiplications and additions of the elimination, as planned. */
  readonly flops: number;
}

/**
 * Fills `factor` from the rows that an assembly has laid out.
 * @param squares f64[order]: the diagonal of the information matrix, caller's numbering; see orthogonalBegin for its range.
 * @param turned f64[order]: gets L⁻¹ Jᵀ b, elimination order, which no sum of Jᵀ b has gone into.
 * @throws {MemoryLimitError}
 * Cost: 2.5 to 5 times a Cholesky factorization.
 */
export function* reflectionSteps(
  assembly: number,
  symbolic: number,
  factor: number,
  squares: number,
  turned: number,
): Steps<Reflected | Singular> {
  const k = kernel();
  const what = "The orthogonal elimination";
  let list = 0;
  let plan = 0;
  let job = 0;
  try {
    list = addressOrThrow(what, k.rowListBegin(assembly), 64);
    yield { advance: (budget) => k.rowListAdvance(list, budget), progress: () => k.rowListProgress(list), from: 0, to: LISTING_SHARE };
    const rows = k.rowListRows(list);
    plan = addressOrThrow(what, k.rowPlanCreate(symbolic, rows, k.rowListStart(list), k.rowListColumn(list)), 8 * rows);
    const bytes = k.orthogonalBytes(plan);
    requireMemory(what, bytes);
    job = addressOrThrow(what, k.orthogonalBegin(factor, plan, k.rowListValues(list), k.rowListRight(list), squares), bytes);
    const failed = yield {
      advance: (budget) => k.orthogonalAdvance(job, budget),
      progress: () => k.orthogonalProgress(job),
      from: LISTING_SHARE,
      to: 1,
    };
    if (failed > 0) return { unknown: failed - 1, pivot: k.orthogonalPivot(job) ** 2 };
    k.orthogonalTurned(job, turned);
    return { flops: k.rowPlanFlops(plan) };
  } finally {
    if (job) k.orthogonalRelease(job);
    if (plan) k.rowPlanRelease(plan);
    if (list) k.rowListRelease(list);
  }
}
