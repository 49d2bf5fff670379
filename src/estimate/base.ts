// A base: the factor of the information matrix as it stood at a rebase, with a fresh ledger on it.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyInts, Loan, requireMemory, withLoan } from "../../bindings/memory.js";
import type { Steps } from "../../bindings/slices.js";
import type { KernelInformation } from "./information.js";
import type { BaseCosts } from "./policy.js";

const ANALYSIS_SHARE = 0.4;
const CONDITION_SHARE = 0.05;

/** Kernel objects of one base; `free` gives them back. */
export interface Base {
  readonly symbolic: number;
  readonly factor: number;
  readonly ledger: number;
  /** State numbers (places in the information matrix) by slot. */
  readonly stateOfSlot: Int32Array;
  readonly costs: BaseCosts;
  /** An estimate of ‖D Σ D‖ with D² the diagonal of Λ. */
  readonly condition: number;
  /** max Λ[j, j] ÷ L[j, j]²: how far elimination shrank a pivot, a lower bound on the condition of Λ scaled to unit diagonal. */
  readonly pivotSpread: number;
  free(): void;
}

/** The information matrix is not safely positive definite. */
export interface Singular {
  /** Unknown of the information matrix whose pivot failed. */
  readonly unknown: number;
  readonly pivot: number;
}

/** Builds a base in steps that can be sliced; what it holds it gives back when it is dropped halfway.
 *  @param queries marginals that the base will be asked for, for the choice of its order.
 *  @param memoryLimit bytes that its factor may take.
 *  @throws {MemoryLimitError} before the numbers are started.
 *  @returns the base with its ledger, right-hand side set, or where the matrix is not safely positive definite. */
export function* baseSteps(information: KernelInformation, queries: number, memoryLimit: number): Steps<Base | Singular> {
  const k = kernel();
  const { order, states, blockSizes, columnPointers, rowIndices, values } = information;
  const loan = new Loan("A new base");
  let analysis = 0;
  let symbolic = 0;
  let factor = 0;
  let condition = 0;
  let taken = false;
  try {
    analysis = addressOrThrow("A new base", k.analysisBegin(order, columnPointers, rowIndices, states, blockSizes, 0, 0, queries), 256);
    const analysed = yield {
      advance: (budget) => k.analysisAdvance(analysis, budget),
      progress: () => k.analysisProgress(analysis),
      from: 0,
      to: ANALYSIS_SHARE,
    };
    if (analysed === status.tooLarge) throw new MemoryLimitError("The factor", k.analysisFactorBytes(analysis), bytesAvailable());
    if (analysed === status.outOfMemory) throw new MemoryLimitError("The analysis of the pattern", 4 * order, bytesAvailable());
    symbolic = addressOrThrow("The analysis of the pattern", k.analysisFinish(analysis), 0);
    const bytes = k.factorBytes(symbolic);
    if (bytes > memoryLimit) throw new MemoryLimitError("The factor", bytes, memoryLimit);
    requireMemory("The factor", bytes);
    factor = addressOrThrow("The factor", k.factorCreate(symbolic), bytes);
    k.factorBegin(factor, values);
    const result = yield {
      advance: (budget) => k.factorAdvance(factor, budget),
      progress: () => k.factorProgress(factor),
      from: ANALYSIS_SHARE,
      to: 1 - CONDITION_SHARE,
    };
    if (result > 0) return { unknown: result - 1, pivot: k.factorPivot(factor) };
    const diagonal = loan.room(8 * order);
    k.orderDiagonal(symbolic, columnPointers, values, diagonal);
    const bytesOfCondition = 8 * 4 * order;
    condition = addressOrThrow("The condition of a new base", k.scaledConditionBegin(factor, diagonal), bytesOfCondition);
    yield {
      advance: (budget) => k.scaledConditionAdvance(condition, budget),
      progress: () => k.scaledConditionProgress(condition),
      from: 1 - CONDITION_SHARE,
      to: 1,
    };
    const base = finish(information, symbolic, factor, diagonal, k.scaledConditionResult(condition));
    taken = true;
    return base;
  } finally {
    if (analysis) k.analysisRelease(analysis);
    if (condition) k.scaledConditionRelease(condition);
    if (factor && !taken) k.factorRelease(factor);
    if (symbolic && !taken) k.symbolicRelease(symbolic);
    loan.giveBack();
  }
}

export const isSingular = (result: Base | Singular): result is Singular => "unknown" in result;

function finish(
  { order, states, blockSizes, stateOf, vector }: KernelInformation,
  symbolic: number,
  factor: number,
  diagonal: number,
  estimate: number,
): Base {
  const k = kernel();
  return withLoan("The ledger", (loan) => {
    const stateOfSlot = loan.room(4 * states);
    const dimensions = loan.room(4 * states);
    k.orderStates(symbolic, stateOf, blockSizes, stateOfSlot, dimensions);
    const pivotSpread = k.pivotSpread(factor, diagonal);
    const ledger = addressOrThrow("The ledger", k.ledgerCreate(factor, states, dimensions), 16 * order);
    const right = loan.room(8 * order);
    k.orderVector(symbolic, vector, right);
    if (k.setRight(ledger, right) !== status.ok) {
      k.ledgerRelease(ledger);
      throw new MemoryLimitError("The ledger", 16 * order, bytesAvailable());
    }
    return {
      symbolic,
      factor,
      ledger,
      stateOfSlot: copyInts(stateOfSlot, states),
      condition: Math.max(estimate, pivotSpread),
      pivotSpread,
      costs: {
        flops: k.symbolicFlops(symbolic),
        nonzeros: k.symbolicNonzeros(symbolic),
        bytes: k.factorBytes(symbolic),
        states,
      },
      free: () => {
        k.ledgerRelease(ledger);
        k.factorRelease(factor);
        k.symbolicRelease(symbolic);
      },
    };
  });
}
