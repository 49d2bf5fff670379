// A base: the factor of the information matrix as it stood at a rebase, with a fresh ledger on it.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyFloats, copyInts, Loan, requireMemory, withLoan } from "../../bindings/memory.js";
import { part, type Steps } from "../../bindings/slices.js";
import { conditionText, LARGEST_LOSS, LARGEST_SQUARE, NO_DIGITS, type Route } from "../matrix/routes.js";
import type { KernelInformation } from "./information.js";
import type { BaseCosts } from "./policy.js";
import { reflectionSteps } from "./reflections.js";

const ANALYSIS_SHARE = 0.4;
/** Of what follows the analysis. */
const CONDITION_SHARE = 0.08;
/** Of the same, when reflections may follow it. */
const CHOLESKY_SHARE = 0.5;

/** Kernel objects of one base; `free` gives them back. */
export interface Base {
  readonly symbolic: number;
  readonly factor: number;
  readonly ledger: number;
  /** State numbers (places in the information matrix) by slot. */
  readonly stateOfSlot: Int32Array;
  readonly costs: BaseCosts;
  /** How its factor was made, and why, in words that begin with the route. */
  readonly route: "information" | "orthogonal";
  readonly because: string;
  /** κ: an estimate of ‖D Σ D‖ with D² the diagonal of Λ. */
  readonly condition: number;
  /** What rounding in the factor is multiplied by; see `ErrorSources`. */
  readonly factorCondition: number;
  free(): void;
}

/** The information matrix is not safely positive definite; by the orthogonal route: the rows do not determine all unknowns. */
export interface Singular {
  /** Unknown of the information matrix whose pivot failed. */
  readonly unknown: number;
  readonly pivot: number;
}

export interface BaseOptions {
  /** Marginals that the base will be asked for, for the choice of its order. */
  readonly queries: number;
  /** Bytes that its factor may take. */
  readonly memoryLimit: number;
  /** Others than `"information"` need the information with its rows kept. */
  readonly route: Route;
}

/** Builds a base in steps that can be sliced; what it holds it gives back when it is dropped halfway.
 *  @throws {MemoryLimitError} before the numbers are started.
 *  @returns the base with its ledger, right-hand side set, or where the matrix is not safely positive definite. */
export function* baseSteps(information: KernelInformation, { queries, memoryLimit, route }: BaseOptions): Steps<Base | Singular> {
  const k = kernel();
  const { order, states, blockSizes, columnPointers, rowIndices, values } = information;
  const loan = new Loan("A new base");
  let analysis = 0;
  let symbolic = 0;
  let factor = 0;
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
    const diagonal = loan.room(8 * order);
    k.lowerDiagonal(order, columnPointers, values, diagonal);
    const made = yield* part(numbersOf(information, symbolic, factor, diagonal, route, loan), ANALYSIS_SHARE, 1);
    if ("unknown" in made) return made;
    const base = finish(information, symbolic, factor, made);
    taken = true;
    return base;
  } finally {
    if (analysis) k.analysisRelease(analysis);
    if (factor && !taken) k.factorRelease(factor);
    if (symbolic && !taken) k.symbolicRelease(symbolic);
    loan.giveBack();
  }
}

export const isSingular = (result: Base | Singular): result is Singular => "unknown" in result;

/** What a route has put into the factor. */
interface Numbers {
  readonly route: Base["route"];
  readonly because: string;
  readonly condition: number;
  /** f64[order], elimination order: L⁻¹ Jᵀ b; undefined: to be solved for. */
  readonly turned: number | undefined;
  readonly eliminationFlops: number;
}

/** Fills the factor by the route asked for, or by the one that the condition asks for. @param diagonal of Λ, caller's numbering. */
function* numbersOf(
  { order, values, assembly }: KernelInformation,
  symbolic: number,
  factor: number,
  diagonal: number,
  route: Route,
  loan: Loan,
): Steps<Numbers | Singular> {
  const k = kernel();
  const flops = k.symbolicFlops(symbolic);
  const squares = copyFloats(diagonal, order);
  const unread = squares.indexOf(0);
  if (unread >= 0) return { unknown: unread, pivot: 0 };
  const canReflect = assembly !== undefined && squares.every((square) => square >= 1 / LARGEST_SQUARE && square <= LARGEST_SQUARE);
  let instead = "as asked for";
  let trial = 0;
  if (route !== "orthogonal" || !canReflect) {
    trial = route === "information" || !canReflect ? 1 : CHOLESKY_SHARE;
    k.factorBegin(factor, values);
    const failed = yield {
      advance: (budget) => k.factorAdvance(factor, budget),
      progress: () => k.factorProgress(factor),
      from: 0,
      to: trial * (1 - CONDITION_SHARE),
    };
    if (failed > 0) {
      if (route === "information" || !canReflect) return { unknown: failed - 1, pivot: k.factorPivot(factor) };
      instead = "since JᵀWJ is not safely positive definite in f64";
    } else {
      const condition = yield* part(conditionSteps(order, factor, diagonal), trial * (1 - CONDITION_SHARE), trial);
      const byCholesky = { condition, route: "information", turned: undefined, eliminationFlops: flops } as const;
      const why = conditionText(condition);
      const isSafe = route === "automatic" && condition * Number.EPSILON <= LARGEST_LOSS;
      if (route === "information") return { ...byCholesky, because: "information route, as asked for" };
      if (isSafe) return { ...byCholesky, because: `information route, since ${why}` };
      if (!canReflect) return { ...byCholesky, because: "information route, since squared columns of the rows pass what reflections bear" };
      instead = `since ${why}`;
    }
  }
  const turned = loan.room(8 * order);
  const reflected = yield* part(reflectionSteps(assembly!, symbolic, factor, diagonal, turned), trial, 1 - CONDITION_SHARE);
  if ("unknown" in reflected) return reflected;
  const condition = yield* part(conditionSteps(order, factor, diagonal), 1 - CONDITION_SHARE, 1);
  if (Math.sqrt(condition) * Number.EPSILON >= NO_DIGITS) {
    const unknown = k.weakestUnknown(factor, diagonal);
    return { unknown, pivot: squares[unknown]! / k.pivotSpread(factor, diagonal) };
  }
  const eliminationFlops = reflected.flops + (trial > 0 ? flops : 0);
  return { condition, route: "orthogonal", because: `orthogonal route, ${instead}`, turned, eliminationFlops };
}

/** The condition of Λ scaled to unit diagonal, by the factor at hand. How far elimination shrank a pivot is a lower bound on it. */
function* conditionSteps(order: number, factor: number, diagonal: number): Steps<number> {
  const k = kernel();
  let job = 0;
  try {
    job = addressOrThrow("The condition of a new base", k.scaledConditionBegin(factor, diagonal), 8 * 4 * order);
    yield { advance: (budget) => k.scaledConditionAdvance(job, budget), progress: () => k.scaledConditionProgress(job) };
    return Math.max(k.scaledConditionResult(job), k.pivotSpread(factor, diagonal));
  } finally {
    if (job) k.scaledConditionRelease(job);
  }
}

function finish({ order, states, blockSizes, stateOf, vector }: KernelInformation, symbolic: number, factor: number, made: Numbers): Base {
  const k = kernel();
  const { route, because, condition, turned, eliminationFlops } = made;
  return withLoan("The ledger", (loan) => {
    const stateOfSlot = loan.room(4 * states);
    const dimensions = loan.room(4 * states);
    k.orderStates(symbolic, stateOf, blockSizes, stateOfSlot, dimensions);
    const ledger = addressOrThrow("The ledger", k.ledgerCreate(factor, states, dimensions), 16 * order);
    let complete = false;
    try {
      if (turned) k.setTurned(ledger, turned);
      else {
        const right = loan.room(8 * order);
        k.orderVector(symbolic, vector, right);
        if (k.setRight(ledger, right) !== status.ok) throw new MemoryLimitError("The ledger", 16 * order, bytesAvailable());
      }
      complete = true;
    } finally {
      if (!complete) k.ledgerRelease(ledger);
    }
    return {
      symbolic,
      factor,
      ledger,
      stateOfSlot: copyInts(stateOfSlot, states),
      route,
      because,
      condition,
      factorCondition: route === "orthogonal" ? Math.sqrt(condition) : condition,
      costs: {
        flops: k.symbolicFlops(symbolic),
        eliminationFlops,
        nonzeros: k.symbolicNonzeros(symbolic),
        bytes: k.factorBytes(symbolic),
        states,
        blocksBySolves: route === "orthogonal",
      },
      free: () => {
        k.ledgerRelease(ledger);
        k.factorRelease(factor);
        k.symbolicRelease(symbolic);
      },
    };
  });
}
