// When a new base pays: a cost model in nanoseconds of work, by counts alone, so that the same calls always take the same route.

/** What one unit of each kind of work takes, roughly: from profiles of streams of some thousand states, not yet fitted. The cost of carrying
 *  on is flat around its best point, so routes change little when one of them is off by half. */
const nanoseconds = {
  /** One multiplication and addition of the dense kernels in a factorization, small fronts included. */
  factorFlop: 0.1,
  /** One entry of L: reading, writing and clearing it. */
  factorEntry: 3,
  /** One entry of L times one column, in a solve that reads all of it. */
  solveEntry: 0.7,
  /** One entry of the ledger's columns times one new column: compared with it, and combined with it. */
  ledgerEntry: 0.6,
  /** One flop of a column carried forward along its path. */
  pathFlop: 0.2,
  /** One number of a leaf times one column, forward and back. */
  leafNumber: 1.5,
  /** Order and symbolic analysis, for one state. */
  analysisState: 2000,
  /** Assembling the information matrix, for one measurement. */
  assembledMeasurement: 250,
} as const;

/** Share of the factor's bytes that the ledger may hold beyond the states' own numbers. */
const MEMORY_SHARE = 0.25;
/** Below this the ledger's bytes are never a reason: a handful of pages. */
const MEMORY_FLOOR = 1 << 20;

export interface BaseCosts {
  /** Flops of the factor by Cholesky, and of all that was eliminated for it, reflections included; entries of L, bytes of the factor. */
  readonly flops: number;
  readonly eliminationFlops: number;
  readonly nonzeros: number;
  readonly bytes: number;
  readonly states: number;
  /** Whether all blocks are read off by a forward solve each: the selected inverse takes differences, which lose κ in digits where solves
   *  lose √κ, so that it would undo what an orthogonal elimination has kept. */
  readonly blocksBySolves: boolean;
}

/** Nanoseconds that a new base would take now. */
export function rebaseCost(last: BaseCosts, states: number, measurements: number): number {
  // The factor of a larger system grows about as its states to the power 1.5 (nested dissection of planar graphs; George 1973).
  const growth = last.states > 0 ? (states / last.states) ** 1.5 : 1;
  return (
    growth * (last.eliminationFlops * nanoseconds.factorFlop + last.nonzeros * nanoseconds.factorEntry) +
    states * nanoseconds.analysisState +
    measurements * nanoseconds.assembledMeasurement
  );
}

/** Nanoseconds by which ledger and leaves make `columns` columns dearer than they would be on a new base. */
export function carryingCost(columns: number, ledgerEntries: number, leafNumbers: number, rows: number): number {
  return columns * ((ledgerEntries + rows * rows) * nanoseconds.ledgerEntry + leafNumbers * nanoseconds.leafNumber);
}

/** Nanoseconds of a backward solve with `columns` columns over all of L. */
export const backwardCost = (columns: number, nonzeros: number): number => columns * nonzeros * nanoseconds.solveEntry;

/** Entries of L on the path of a row, as a share of all, before the first row has been counted: as in nets under minimum degree. */
export const FIRST_PATH_SHARE = 0.05;

/** Nanoseconds of all blocks afresh: by the selected inverse, about 2.3 times its factor, or by a path each. */
export const blocksCost = (base: BaseCosts): number =>
  base.blocksBySolves
    ? base.states * pathCost(2 * FIRST_PATH_SHARE * base.nonzeros)
    : 2.3 * (base.flops * nanoseconds.factorFlop + base.nonzeros * nanoseconds.factorEntry);

/** Nanoseconds of one column carried forward along its path, which takes so many flops. */
export const pathCost = (flops: number): number => flops * nanoseconds.pathFlop;

/** Whether a new base pays: what carrying on has cost beyond it since the last one comes to its price, so the total is at most twice
 *  that of the best policy that knows the future (the ski-rental bound; Karlin, Manasse, Rudolph, Sleator 1988); or the ledger has
 *  outgrown its share of memory. */
export function rebasePays(carried: number, cost: number, ledgerBytes: number, base: BaseCosts): "cost" | "memory" | undefined {
  if (carried > cost) return "cost";
  if (ledgerBytes > MEMORY_FLOOR && ledgerBytes > MEMORY_SHARE * base.bytes) return "memory";
  return undefined;
}

/** How many times the error of a fresh number a difference may carry before it is suspect, and the error at which it is. */
const SUSPECT_RATIO = 1e3;
const SUSPECT_ERROR = 1e-8;

/** Whether subtraction has eaten, or will eat, too many digits: of a kept block, whose relative error is that of its computation times the
 *  ratio of the largest trace it has had to its trace now, and never heals; or in the ledger.
 *  @param error the bound on the relative error of what is subtracted. */
export const subtractionSpoils = (ratio: number, error: number): boolean => ratio > SUSPECT_RATIO && ratio * error > SUSPECT_ERROR;

/** Kept numbers are computed afresh when their bound passes this, but need not be better than so many times the bound of fresh ones. Errors
 *  are mostly a hundredth of their bounds: with it the marginals of a heavy patrol stay within 1e-9 over ten thousand poses. */
const KEPT_ERROR = 2e-7;
const NEAR_FRESH = 4;

/** The bound that kept numbers may have where fresh ones would have `fresh`. */
export const keptLimit = (fresh: number): number => Math.max(KEPT_ERROR, NEAR_FRESH * fresh);
