// Random networks whose weights lie many orders of magnitude apart, changing commit by commit, beside their exact marginals.

import {
  Estimate,
  type MeasurementId,
  type MeasurementInput,
  NotPositiveDefiniteError,
  type StateId,
  UndeterminedError,
} from "../../src/index.js";
import type { Route } from "../../src/matrix/routes.js";
import { random } from "../../src/support/random.js";
import { EnvelopeCholesky } from "./envelope.js";
import { ExactSums } from "./exact-twin.js";

/** One answer beside the truth. */
export interface Comparison {
  readonly network: number;
  readonly commit: number;
  readonly call: "marginals" | "marginal";
  /** Largest |found − true| ÷ √(Σii Σjj) over the blocks read. */
  readonly error: number;
  /** As the commit reported it, and as `health` does before and after the reading. */
  readonly reported: number;
  readonly before: number;
  readonly after: number;
}

/** Largest difference of two blocks' entries ÷ the true block's trace. */
export function errorOfTrace(found: ArrayLike<number>, truth: ArrayLike<number>): number {
  const d = Math.sqrt(truth.length);
  let trace = 0;
  for (let i = 0; i < d; i += 1) trace += truth[i * (d + 1)]!;
  let worst = 0;
  for (let k = 0; k < truth.length; k += 1) worst = Math.max(worst, Math.abs(found[k]! - truth[k]!) / trace);
  return Number.isNaN(worst) ? Number.POSITIVE_INFINITY : worst;
}

/** True blocks of Σ on the diagonal, row-major, one after another. */
export function exactBlocks(
  states: readonly (readonly [id: StateId, dimension: number])[],
  measurements: Iterable<MeasurementInput>,
): Float64Array[] {
  const first = new Map<StateId, number>();
  const dimension = new Map(states);
  let order = 0;
  for (const [id, d] of states) {
    first.set(id, order);
    order += d;
  }
  const sums = new ExactSums(order);
  for (const m of measurements)
    sums.measure(
      m,
      (state) => first.get(state)!,
      (state) => dimension.get(state)!,
    );
  return new EnvelopeCholesky(sums.columns()).inverseBlocks(states.map(([, d]) => d));
}

/**
 * Feeds network `seed` and compares after each commit, bases by `route`.
 * Standard deviations are 10 to a uniform power from −3 to 3, so that weights lie 12 orders of magnitude apart; in every fourth network
 * they stay within one order, in every other fourth each row is one of two kinds. Some noise is given as a matrix, some states are forgotten.
 */
export function compareNetwork(
  seed: number,
  track: "all" | "none",
  commits: number,
  take: (comparison: Comparison) => void,
  route: Route = "automatic",
): void {
  const r = random(seed);
  const pick = <T>(list: readonly T[]): T => list[r.below(list.length)]!;
  const power = (): number => (seed % 4 === 0 ? 0.5 * (r.uniform() - 0.5) : seed % 4 === 1 ? pick([-3, 3]) : 6 * (r.uniform() - 0.5));
  const estimate = new Estimate({ track, onDoubt: "answer", route });
  if (track === "all" && r.uniform() < 0.5) estimate.track("all", { column: "newest" });
  let states: [id: StateId, dimension: number][] = [];
  let inForce = new Map<MeasurementId, MeasurementInput>();
  /** What forgotten states leave behind: it still counts for the others. */
  const gone: [StateId, number][] = [];
  const absorbed: MeasurementInput[] = [];
  /** Mostly independent rows; else a matrix whose correlation comes near to one: R = diag(s) (I (1 − ρ) + 1 1ᵀ ρ) diag(s). */
  const noise = (rows: number) => {
    const deviations = Array.from({ length: rows }, () => 10 ** power());
    if (r.uniform() < 0.8) return { standardDeviations: deviations };
    const correlation = 1 - 10 ** (-8 * r.uniform() - 0.1);
    const matrix = deviations.map((a, i) => deviations.map((b, j) => (i === j ? a * a : correlation * (a * b))));
    return r.uniform() < 0.5 ? { covariance: matrix } : { information: matrix };
  };
  const measure = (of: readonly (readonly [StateId, number])[], rows: number): MeasurementInput => ({
    states: of.map(([id]) => id),
    jacobians: of.map(([, d]) => Float64Array.from({ length: rows * d }, () => r.normal())),
    residual: Array.from({ length: rows }, () => r.normal()),
    ...noise(rows),
  });
  for (let commit = 0; commit < commits; commit += 1) {
    const nextStates = [...states];
    const next = new Map(inForce);
    const add = (m: MeasurementInput): void => {
      next.set(estimate.addMeasurement(m), m);
    };
    const arriving = states.length === 0 ? 2 + r.below(3) : r.below(4) === 0 ? 0 : 1 + r.below(2);
    for (let k = 0; k < arriving; k += 1) {
      const d = 1 + r.below(3);
      const state: [StateId, number] = [estimate.addState(d), d];
      const others = nextStates.length === 0 || r.uniform() < 0.15 ? [] : [pick(nextStates)];
      if (others.length > 0 && r.uniform() < 0.2) others.push(pick(nextStates));
      nextStates.push(state);
      add(measure([...new Set(others), state], d + r.below(2)));
    }
    for (let k = r.below(3); k > 0; k -= 1) {
      const of = new Set([pick(nextStates), pick(nextStates)]);
      add(measure([...of], 1 + r.below(3)));
    }
    if (inForce.size > 0) {
      for (let k = r.below(3); k > 0; k -= 1) {
        const [id, m] = pick([...inForce]);
        if (!next.has(id) || next.get(id) !== m) continue;
        if (r.uniform() < 0.5) {
          estimate.withdraw(id);
          next.delete(id);
        } else {
          const changed = { ...m, jacobians: (m.jacobians as Float64Array[]).map((block) => block.map((v) => v * (1 + 0.1 * r.normal()))) };
          estimate.replace(id, { jacobians: changed.jacobians, residual: m.residual });
          next.set(id, changed);
        }
      }
    }
    const leaving = nextStates.length > 6 && r.uniform() < 0.3 ? pick(states)[0] : undefined;
    if (leaving !== undefined) estimate.forget([leaving]);
    let reported: number;
    try {
      reported = estimate.commit().bound;
    } catch (error) {
      if (!(error instanceof UndeterminedError || error instanceof NotPositiveDefiniteError)) throw error;
      estimate.discard();
      continue;
    }
    states = nextStates;
    inForce = next;
    if (leaving !== undefined) {
      states = states.filter(([id]) => id !== leaving);
      for (const [id, m] of inForce)
        if (m.states.includes(leaving)) {
          absorbed.push(m);
          inForce.delete(id);
        }
      gone.push(nextStates.find(([id]) => id === leaving)!);
    }
    const reads = r.uniform();
    if (reads < 0.3) continue; // so that several commits are read at once
    let truth: Float64Array[];
    try {
      truth = exactBlocks([...states, ...gone], [...inForce.values(), ...absorbed]).slice(0, states.length);
    } catch {
      continue; // not definite even in double-double
    }
    const before = estimate.health({ samples: 0 }).bound;
    let error = 0;
    if (reads < 0.5) {
      const k = r.below(states.length);
      error = errorOfTrace(estimate.marginal(states[k]![0]), truth[k]!);
    } else {
      const found = estimate.marginals();
      let at = 0;
      for (const block of truth) {
        error = Math.max(error, errorOfTrace(found.subarray(at, at + block.length), block));
        at += block.length;
      }
    }
    const after = estimate.health({ samples: 0 }).bound;
    take({ network: seed, commit, call: reads < 0.5 ? "marginal" : "marginals", error, reported, before, after });
  }
  estimate.dispose();
}
