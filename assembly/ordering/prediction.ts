/** What the calls a factor is made for will cost under an order, in budget units (about 1 ns each): the measure by which orders are
 *  chosen. From counts alone, never a clock, so that the choice repeats. */

/** Flops of the factorization a unit, and units for each entry of L on top (single thread, this kernel's speed on large fronts). */
const FLOPS_A_UNIT: f64 = 18;
const ENTRY_UNITS: f64 = 3;
/** A selected inverse costs this many factorizations; measured 1.9 to 3.9 over nets, patrols, chains and spirals. */
const INVERSE_FACTOR: f64 = 2.3;
/** Units for an entry of L on the way of a query to the root, for each of its right-hand sides. */
const PATH_UNITS: f64 = 1.5;

@unmanaged
export class Prediction {
  /** Entries of L and Σ (column count)². */
  nonzeros: f64;
  flops: f64;
  /** Mean over unknowns of the entries of L on the way to the root. */
  path: f64;
}

/** Units for so many factorizations, selected inverses and marginals of one state of `dimension` unknowns. */
export function predictedWork(p: Prediction, factorizations: f64, inverses: f64, queries: f64, dimension: f64): f64 {
  const factor = p.flops / FLOPS_A_UNIT + ENTRY_UNITS * p.nonzeros;
  return (factorizations + INVERSE_FACTOR * inverses) * factor + queries * PATH_UNITS * p.path * dimension;
}
