// Nonlinear least squares on an estimate: Gauss–Newton, its steps controlled by damping (Levenberg 1944; Marquardt 1963) that is gone before
// anything is reported, robust weights by iteratively reweighted least squares (Holland, Welsch 1977).
import { SigmatideError } from "../errors.js";
import { AdjustedReading, type Fit } from "./adjustment/adjusted-reading.js";
import { AdjustedState } from "./adjustment/adjusted-state.js";
import { Damping } from "./adjustment/damping.js";
import type { EstimateLike, LinearMeasurement } from "./adjustment/estimate-like.js";
import { noConvergence, noStartingValue } from "./adjustment/failures.js";
import type { Reading, StateDeclaration } from "./reading.js";
import type { ReadingKind } from "./reading-form.js";
import { findForm, type ReadingKindName, readingKinds } from "./reading-kinds.js";
import type { RobustWeight } from "./robust.js";
import { startingValue } from "./starting/starting-values.js";
import { type StateKindName, stateKinds } from "./states.js";

export interface AdjustmentOptions {
  /** Bends the weight of large residuals; the covariances then are those of the weights found. Default: none, plain least squares. */
  readonly robust?: RobustWeight;
  /**
   * A reading is linearized anew when its linear model is off by more than this many of its standard deviations, or its Jacobian by a tenth
   * of this. Default 1e-3: what is left moves an answer by about a thousandth of its standard deviation.
   */
  readonly linearizationTolerance?: number;
  /** Default 100 commits. */
  readonly maximumIterations?: number;
  /** Told of each iteration as it ends: solving a large network takes a while. */
  readonly onIteration?: (iteration: Iteration) => void;
}

/** One commit of the estimate and what came of it. */
export interface Iteration {
  /** Weighted squares (twice the robust losses) of the readings that a step touches, before it and after. */
  readonly costBefore: number;
  readonly costAfter: number;
  readonly accepted: boolean;
  /** Relative to each unknown's own information; 0 is a full Gauss–Newton step. */
  readonly damping: number;
  readonly movedStates: number;
  readonly relinearized: number;
}

export interface AdjustmentReport {
  readonly iterations: readonly Iteration[];
  /** States that were given a starting value from their readings. */
  readonly started: readonly string[];
}

/** A state as it stands. */
export interface StateFacts {
  readonly name: string;
  readonly kind: StateKindName;
  readonly fixed: boolean;
  /** In its kind's stored form, a copy; undefined before it has a starting value. */
  readonly value: Float64Array | undefined;
  /** The estimate's own name of it; a fixed or new state has none. */
  readonly id: number | undefined;
}

function factsOf({ name, kind, fixed, value, id }: AdjustedState): StateFacts {
  return { name, kind: kind.name, fixed, value: value?.slice(), id };
}

/** A reading as the adjustment holds it. */
export type ReadingKey = number;

/** Rounding of a sum of weighted squares, with room for residuals that are small differences of large numbers. */
const levelShare = 1e-12;

/** A turn further from its origin than this is given a new origin, so that local coordinates there and here stay alike. */
const largestTurn = 0.1;

/**
 * States and readings on their way into an estimate, and the values they come to. Add them as they arrive; `solve` lets everything added
 * count. Units are SI and radians; covariances are in the states' local coordinates.
 *
 * The estimate's unknowns are offsets from each state's origin; ask the estimate itself about pairs and redundancy by a
 * state's `id`, about readings that might come by `linearize`.
 * Work follows the change: after the first solve only readings near what moved are looked at again.
 */
export class Adjustment {
  readonly #estimate: EstimateLike;
  readonly #robust: RobustWeight | undefined;
  readonly #tolerance: number;
  readonly #maximumIterations: number;
  readonly #onIteration: ((iteration: Iteration) => void) | undefined;
  readonly #states = new Map<string, AdjustedState>();
  readonly #readings = new Map<ReadingKey, AdjustedReading>();
  readonly #named = new Map<string, ReadingKey>();
  /** Readings that the estimate does not know yet. */
  readonly #arrived = new Set<AdjustedReading>();
  #nextKey = 0;
  /** Something has changed since the last solve. */
  #pending = false;
  /** The last solve failed on its way: the linear models may not fit the values. */
  #disturbed = false;

  constructor(estimate: EstimateLike, options: AdjustmentOptions = {}) {
    const { robust, linearizationTolerance = 1e-3, maximumIterations = 100, onIteration } = options;
    this.#estimate = estimate;
    this.#robust = robust;
    this.#tolerance = linearizationTolerance;
    this.#maximumIterations = maximumIterations;
    this.#onIteration = onIteration;
  }

  /** Declares a state. Without a value one is sought from its readings. @throws {SigmatideError} `NAME_TAKEN` */
  addState({ name, kind, value, fixed }: StateDeclaration): void {
    if (this.#states.has(name))
      throw new SigmatideError("NAME_TAKEN", `There is a state "${name}" already: give each state a name of its own.`, { name });
    const stateKind = stateKinds[kind];
    this.#states.set(name, new AdjustedState(name, stateKind, fixed, value && stateKind.normalize(value)));
  }

  /**
   * Adds a reading of a built-in kind, or of the user's own function. It counts from the next `solve`.
   * @throws {SigmatideError} `UNKNOWN_STATE`; `KINDS_DO_NOT_FIT`; `NOTHING_TO_ESTIMATE`: all its states are fixed; `NAME_TAKEN`.
   */
  addReading(reading: Reading<ReadingKindName | ReadingKind>): ReadingKey {
    const adjusted = this.#prepare(reading);
    if (reading.name !== undefined && this.#named.has(reading.name))
      throw new SigmatideError("NAME_TAKEN", `There is a reading "${reading.name}" already: give each named reading a name of its own.`, {
        name: reading.name,
      });
    const key = this.#nextKey++;
    this.#readings.set(key, adjusted);
    if (reading.name !== undefined) this.#named.set(reading.name, key);
    for (const state of adjusted.states) state.readings.add(adjusted);
    this.#arrived.add(adjusted);
    this.#pending = true;
    return key;
  }

  /** Takes a reading out again, from the next `solve` on. */
  withdraw(reading: ReadingKey | string): void {
    const key = this.#key(reading);
    const adjusted = this.#readings.get(key)!;
    if (adjusted.measurement === undefined) this.#arrived.delete(adjusted);
    else this.#estimate.withdraw(adjusted.measurement);
    this.#pending = true;
    this.#drop(key, adjusted);
  }

  /** Drops states; what they say about their neighbours is kept. Solves first when something waits to be solved. */
  forget(names: readonly string[]): void {
    const states = names.map((name) => this.#state(name));
    if (this.#pending) this.solve();
    const known = states.filter(({ id }) => id !== undefined);
    const gone = new Set(known);
    for (const [key, adjusted] of this.#readings) {
      if (!adjusted.states.some((state) => gone.has(state))) continue;
      for (const state of adjusted.states) state.anchored = true;
      this.#drop(key, adjusted);
    }
    for (const name of names) this.#states.delete(name);
    if (known.length === 0) return;
    this.#estimate.forget(known.map(({ id }) => id!));
    this.#estimate.commit();
  }

  /**
   * A reading as `Estimate.evaluate` takes it: its linear model at the present values, on the estimate's own ids. It need not be part of the
   * adjustment, and does not become so. Robust weights are left aside.
   * @throws {SigmatideError} as `addReading`; `NO_VALUE`: one of its states has not been solved for.
   */
  linearize(reading: Reading<string | ReadingKind>): LinearMeasurement {
    const adjusted = this.#prepare(reading);
    const unsolved = adjusted.freeStates.find(({ id }) => id === undefined);
    if (unsolved)
      throw new SigmatideError("NO_VALUE", `State "${unsolved.name}" has not been solved for yet: solve first.`, { state: unsolved.name });
    return adjusted.measurementOf(adjusted.modelHere().model);
  }

  /** The present value of a state in its kind's stored form; before the first solve, the value it was given. A copy. */
  value(name: string): Float64Array {
    const { value } = this.#state(name);
    if (value === undefined) throw new SigmatideError("NO_VALUE", `State "${name}" has no value yet: solve first.`, { state: name });
    return value.slice();
  }

  /** The covariance of a state in local coordinates at its present value, row-major; zero for a fixed one. */
  covariance(name: string): Float64Array {
    const { id, kind, offset, fixed } = this.#state(name);
    const n = kind.dimension;
    if (fixed) return new Float64Array(n * n);
    if (id === undefined)
      throw new SigmatideError("NO_VALUE", `State "${name}" has not been solved for yet: solve first.`, { state: name });
    const marginal = this.#estimate.marginal(id);
    const chart = kind.chart(offset);
    return chart === undefined ? marginal : congruence(chart, marginal, n);
  }

  /** Every state in order, with its value. */
  *states(): Generator<StateFacts> {
    for (const state of this.#states.values()) yield factsOf(state);
  }

  /** One state. @throws {SigmatideError} `UNKNOWN_STATE` */
  state(name: string): StateFacts {
    return factsOf(this.#state(name));
  }

  /** Readings held, those that wait for the next `solve` included. */
  get readingCount(): number {
    return this.#readings.size;
  }

  /** Every reading that counts, in order: its residual (measured minus predicted) at the present values and its robust weight. */
  *readings(): Generator<{
    key: ReadingKey;
    reading: Reading<string | ReadingKind>;
    measurement: number;
    residual: Float64Array;
    weight: number;
  }> {
    for (const [key, adjusted] of this.#readings) {
      const { reading, measurement, weight } = adjusted;
      if (measurement !== undefined) yield { key, reading, measurement, residual: adjusted.residual(), weight };
    }
  }

  /** Weighted squares of all residuals (twice the sum of robust losses) at the present values. */
  cost(): number {
    let sum = 0;
    for (const { cost, measurement } of this.#readings.values()) if (measurement !== undefined) sum += cost;
    return sum;
  }

  /**
   * Lets everything added and withdrawn count: commits, moves the states, and linearizes anew where the linear models no longer hold, until
   * they hold everywhere at the solution.
   * @throws {SigmatideError} `NO_STARTING_VALUE`, with the states; `BAD_START`: a reading cannot be predicted where its states start;
   *   `DIVERGED`: no step leads downhill; `NOT_CONVERGED`: the iterations ran out; and whatever `commit` throws when states are not
   *   determined. The values then are what they were before the call; what was added is still there and can be withdrawn.
   */
  solve(): AdjustmentReport {
    const started = this.#startStates();
    const before = [...this.#states.values()].map((state) => ({ state, origin: state.origin, offset: state.offset }));
    const damping = new Damping(this.#estimate);
    const iterations: Iteration[] = [];
    try {
      this.#introduce();
      while (!this.#iterate(damping, iterations));
    } catch (error) {
      damping.remove();
      for (const { state, origin, offset } of before) {
        state.origin = origin;
        if (origin) state.moveTo(offset);
      }
      this.#disturbed = true;
      throw error;
    }
    this.#pending = false;
    this.#disturbed = false;
    return { iterations, started };
  }

  /** One commit and its step. @returns whether the solution is reached. */
  #iterate(damping: Damping, iterations: Iteration[]): boolean {
    if (iterations.length >= this.#maximumIterations)
      throw noConvergence("NOT_CONVERGED", `The adjustment has not converged in ${iterations.length} iterations`, this.#readings.values());
    this.#estimate.commit();
    const tried: AdjustedState[] = [];
    const touched = new Set<AdjustedReading>();
    for (const state of this.#states.values()) {
      if (state.id === undefined) continue;
      const offset = this.#estimate.solution(state.id);
      if (offset.every((number, k) => number === state.offset[k])) continue;
      state.try(offset);
      tried.push(state);
      for (const reading of state.readings) touched.add(reading);
    }
    const fits: [AdjustedReading, Fit][] = [];
    let [costBefore, costAfter] = [0, 0];
    let holds = true;
    for (const reading of touched) {
      const fit = reading.fit(this.#tolerance);
      fits.push([reading, fit]);
      costBefore += reading.cost;
      costAfter += fit.cost;
      holds &&= !this.#isStale(reading, fit);
    }
    const { strength } = damping;
    // A full step may go uphill by less than the readings' tolerances or than rounding; a shortened one is there to lead downhill.
    const level = touched.size * this.#tolerance ** 2 + levelShare * costBefore;
    const accepted = strength > 0 ? costAfter < costBefore : holds || costAfter <= costBefore + level;
    let relinearized: number;
    if (accepted) {
      for (const state of tried) state.settle();
      const recentred = this.#recentre(tried);
      for (const [reading, fit] of fits) reading.cost = fit.cost;
      relinearized = this.#relinearize(fits, (reading, fit) => recentred.has(reading) || this.#isStale(reading, fit));
      damping.weaken(this.#states.values());
    } else {
      for (const state of tried) state.drop();
      // Before steps are shortened, models made elsewhere are made here.
      relinearized = this.#relinearize(fits, (reading) => !reading.isFresh);
      if (relinearized === 0 && !damping.strengthen(this.#states.values()))
        throw noConvergence("DIVERGED", "No step makes the readings fit better, however short", this.#readings.values());
    }
    const iteration = { costBefore, costAfter, accepted, damping: strength, movedStates: tried.length, relinearized };
    iterations.push(iteration);
    this.#onIteration?.(iteration);
    return accepted && holds && strength === 0 && relinearized === 0;
  }

  /**
   * Whether a linear model no longer serves: its residual or its robust weight is off by more than the tolerance, or its Jacobian so much
   * that its residual would turn into a step of a tenth of it (as the unknowns are sure by themselves: ties to others may enlarge that).
   */
  #isStale(reading: AdjustedReading, fit: Fit): boolean {
    const { linearizationError, jacobianChange, residual, weight } = fit;
    const tolerance = this.#tolerance;
    const holds =
      linearizationError <= tolerance &&
      jacobianChange * Math.max(1, residual) <= tolerance / 10 &&
      Math.abs(weight - reading.weight) * residual <= tolerance;
    return !holds; // also when a number is not finite
  }

  /** New linear models, made at the present values, for the readings that `wanted` picks. @returns how many. */
  #relinearize(fits: Iterable<[AdjustedReading, Fit]>, wanted: (reading: AdjustedReading, fit: Fit) => boolean): number {
    let count = 0;
    for (const [reading, fit] of fits) {
      if (!wanted(reading, fit)) continue;
      this.#estimate.replace(reading.measurement!, reading.linearize());
      count++;
    }
    return count;
  }

  /** Moves the origins of states that have turned far. @returns the readings on them. */
  #recentre(states: Iterable<AdjustedState>): Set<AdjustedReading> {
    const readings = new Set<AdjustedReading>();
    for (const state of states) {
      const { kind, offset, anchored } = state;
      if (anchored || kind.chart(offset) === undefined || Math.hypot(...offset.subarray(3)) <= largestTurn) continue;
      state.start(state.value!);
      for (const reading of state.readings) readings.add(reading);
    }
    return readings;
  }

  /** Linear models of new readings go into the estimate; after a failure all others are made to fit the values first. */
  #introduce(): void {
    if (this.#disturbed)
      for (const reading of this.#readings.values())
        if (reading.measurement !== undefined) this.#estimate.replace(reading.measurement, reading.linearize());
    for (const reading of this.#arrived) {
      const model = reading.linearize();
      for (const state of reading.freeStates) state.id ??= this.#estimate.addState(state.kind.dimension, { name: state.name });
      reading.measurement = this.#estimate.addMeasurement(reading.measurementOf(model));
      this.#arrived.delete(reading);
    }
  }

  /** Starting values for the states of new readings that have none. @returns their names. */
  #startStates(): string[] {
    const started: string[] = [];
    let waiting = new Set([...this.#arrived].flatMap(({ states }) => states.filter(({ value }) => value === undefined)));
    const ambiguous = new Set<AdjustedState>();
    for (let progress = true; progress && waiting.size > 0; ) {
      progress = false;
      for (const state of waiting) {
        const readings = [...state.readings].flatMap(({ reading }) => (typeof reading.kind === "string" ? [reading as Reading] : []));
        const found = startingValue(state.name, state.kind.name, readings, (name) => {
          const other = this.#states.get(name);
          return other?.value && other.now();
        });
        if (found === "ambiguous") ambiguous.add(state);
        if (found === undefined || found === "ambiguous") continue;
        state.start(state.kind.normalize(found));
        started.push(state.name);
        progress = true;
      }
      waiting = new Set([...waiting].filter(({ value }) => value === undefined));
    }
    if (waiting.size === 0) return started;
    for (const name of started) this.#states.get(name)!.value = undefined;
    throw noStartingValue([...waiting], ambiguous);
  }

  #drop(key: ReadingKey, adjusted: AdjustedReading): void {
    this.#readings.delete(key);
    if (adjusted.reading.name !== undefined) this.#named.delete(adjusted.reading.name);
    for (const state of adjusted.states) state.readings.delete(adjusted);
    adjusted.leave();
  }

  /** A reading with its states, not yet part of anything. */
  #prepare(reading: Reading<string | ReadingKind>): AdjustedReading {
    const states = reading.states.map((name) => this.#state(name));
    const kind = typeof reading.kind === "string" ? readingKinds[reading.kind as ReadingKindName] : reading.kind;
    const form = findForm(
      kind,
      states.map((state) => state.kind.name),
    );
    if (form === undefined)
      throw new SigmatideError(
        "KINDS_DO_NOT_FIT",
        `The reading cannot join ${states.map(({ name, kind }) => `"${name}" (${kind.name})`).join(", ")}.`,
        {
          states: reading.states,
        },
      );
    if (states.every(({ fixed }) => fixed))
      throw new SigmatideError(
        "NOTHING_TO_ESTIMATE",
        `Every state of the reading on ${reading.states.join(", ")} is fixed: leave it out, or free a state.`,
        {
          states: reading.states,
        },
      );
    return new AdjustedReading(reading, form, states, this.#robust);
  }

  #key(reading: ReadingKey | string): ReadingKey {
    const key = typeof reading === "string" ? this.#named.get(reading) : reading;
    if (key === undefined || !this.#readings.has(key))
      throw new SigmatideError("UNKNOWN_READING", `There is no reading ${JSON.stringify(reading)}, or it was withdrawn already.`, {
        reading,
      });
    return key;
  }

  #state(name: string): AdjustedState {
    const state = this.#states.get(name);
    if (state === undefined) throw new SigmatideError("UNKNOWN_STATE", `There is no state "${name}": declare it first.`, { state: name });
    return state;
  }
}

/** T Σ Tᵀ, all n × n, row-major. */
function congruence(t: Float64Array, sigma: Float64Array, n: number): Float64Array {
  const product = (a: Float64Array, b: (k: number, j: number) => number) =>
    Float64Array.from({ length: n * n }, (_, at) => {
      let sum = 0;
      for (let k = 0; k < n; k++) sum += a[Math.floor(at / n) * n + k]! * b(k, at % n);
      return sum;
    });
  const left = product(t, (k, j) => sigma[k * n + j]!);
  return product(left, (k, j) => t[j * n + k]!);
}
