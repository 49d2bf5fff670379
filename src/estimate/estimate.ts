// The estimate: states and measurements as they come and go, and how sure every state is after each commit.
import { Handle } from "../../bindings/handle.js";
import { OptionError } from "../errors.js";
import { requireIndex, requireKnownOptions, requireWord } from "../support/checks.js";
import { CommitUnderWayError, NotCommittedError, UncertainAnswerError, UndeterminedError, UnknownMeasurementError } from "./commit-errors.js";
import { Engine, type Outcome, SingularBatch, type World } from "./engine.js";
import { UnknownStateError } from "./errors.js";
import { absorbStates } from "./leaf.js";
import { crossBlocks, eachMarginal, jointCovariance } from "./marginals.js";
import { type CheckedMeasurement, type Linearization, type MeasurementInput, relinearize, type StateId, whiten } from "./rows.js";
import type { OwnedRows } from "./system.js";
import type { WhitenedRows } from "./whitened.js";

export type MeasurementId = number;

export interface EstimateOptions {
  /** Whether the marginals of all states are kept current; see `track`. Default `"none"`. */
  track?: "all" | "none" | undefined;
  /** The largest relative error that a marginal may carry before a question about it throws. Default 1e-6. */
  tolerance?: number | undefined;
  /** What a question does when its bound passes the tolerance. Default `"throw"`; with `"answer"` see `health().bound`. */
  onDoubt?: "throw" | "answer" | undefined;
}

export interface CommitReport {
  /** `"none"`: nothing was pending. `"ledger"`: the base stays. `"rebase"`: a new base was factored. */
  readonly route: "none" | "ledger" | "rebase";
  /** Why this route, in words. */
  readonly because: string;
  /** States and measurements in force after the commit. */
  readonly states: number;
  readonly measurements: number;
  readonly predictedFlops: number;
  readonly countedFlops: number;
  /** A bound on the relative error of the marginals. */
  readonly bound: number;
}

interface StateRecord {
  readonly dimension: number;
  readonly name: string | undefined;
  /** Pending: added since the last commit. Forgotten ones stay in the base until the next one. */
  standing: "pending" | "committed" | "forgotten";
}

interface MeasurementRecord {
  rows: CheckedMeasurement;
  standing: "pending" | "committed" | "withdrawn" | "absorbed";
}

const optionNames = ["track", "tolerance", "onDoubt"];

/**
 * A least-squares estimate whose covariances stay current while states and measurements come and go.
 * What is added, withdrawn, replaced or forgotten counts from the next `commit`; every question answers for the last one.
 * Numbers are f64; small matrices are row-major. A residual is measured minus predicted at the linearization point, a Jacobian the
 * derivative of the prediction, and `solution` the correction to the linearization point.
 * Cost: a commit follows the change, not the size; see `commit`. Dispose after use.
 */
export class Estimate {
  readonly #states: StateRecord[] = [];
  readonly #measurements: MeasurementRecord[] = [];
  /** What forgotten states have left behind, as rows on their neighbours; and their rows until the next base takes those in. */
  #condensed: WhitenedRows[] = [];
  #newStates: StateId[] = [];
  #added: MeasurementId[] = [];
  #withdrawn = new Set<MeasurementId>();
  #replaced = new Map<MeasurementId, CheckedMeasurement>();
  #forgotten = new Set<StateId>();
  #inForce = 0;
  #alive = 0;
  #track: "all" | "none" = "none";
  #column: StateId | "newest" | undefined;
  #busy = false;
  readonly #tolerance: number;
  readonly #onDoubt: "throw" | "answer";
  readonly #engine: Engine;
  readonly #handle: Handle;
  #solution: Float64Array | undefined;

  constructor(options: EstimateOptions = {}) {
    requireKnownOptions("Estimate", options, optionNames);
    const { track = "none", tolerance = 1e-6, onDoubt = "throw" } = options;
    requireWord("track", track, ["all", "none"]);
    requireWord("onDoubt", onDoubt, ["throw", "answer"]);
    if (!(tolerance > 0)) throw new OptionError(`tolerance is ${tolerance}: it must be a number greater than 0.`, { tolerance });
    this.#track = track;
    this.#tolerance = tolerance;
    this.#onDoubt = onDoubt;
    const states = this.#states;
    const engine = new Engine((state) => states[state]!.dimension);
    this.#engine = engine;
    this.#handle = new Handle(this, "estimate", 1, () => engine.free());
  }

  /** Adds a state of `dimension` unknowns, 1 to 16. It counts from the next commit, which needs measurements that determine it.
   *  @throws {IndexRangeError | DisposedError | CommitUnderWayError} */
  addState(dimension: number, options: { name?: string | undefined } = {}): StateId {
    this.#requireIdle("addState");
    requireIndex("dimension", dimension, 1, 16);
    requireKnownOptions("addState", options, ["name"]);
    const id = this.#states.length;
    this.#states.push({ dimension, name: options.name, standing: "pending" });
    this.#newStates.push(id);
    return id;
  }

  /** Adds a measurement of any number of rows on any number of states; see `MeasurementInput`. It counts from the next commit.
   *  @throws typed errors that name the entry; see `whiten`. @throws {DisposedError | CommitUnderWayError} */
  addMeasurement(measurement: MeasurementInput): MeasurementId {
    this.#requireIdle("addMeasurement");
    const rows = whiten(measurement, (state) => this.#dimensionOf(state));
    const id = this.#measurements.length;
    this.#measurements.push({ rows, standing: "pending" });
    this.#added.push(id);
    return id;
  }

  /** Takes a measurement out from the next commit on, as if it had never come.
   *  @throws {UnknownMeasurementError} never added, out already, or reading a forgotten state. @throws {DisposedError | CommitUnderWayError} */
  withdraw(measurement: MeasurementId): void {
    this.#requireIdle("withdraw");
    const record = this.#inForceRecord(measurement);
    if (record.standing === "pending") {
      record.standing = "withdrawn";
      this.#added.splice(this.#added.indexOf(measurement), 1);
      return;
    }
    this.#replaced.delete(measurement);
    this.#withdrawn.add(measurement);
  }

  /** Gives a measurement new Jacobians and residual (a later linearization) from the next commit on; states and noise stay.
   *  @throws as `withdraw` and `addMeasurement`. */
  replace(measurement: MeasurementId, by: Linearization): void {
    this.#requireIdle("replace");
    const record = this.#inForceRecord(measurement);
    const rows = relinearize(this.#replaced.get(measurement) ?? record.rows, by, (state) => this.#dimensionOf(state));
    if (record.standing === "pending") record.rows = rows;
    else this.#replaced.set(measurement, rows);
  }

  /** Drops states from the next commit on. What is known of the others stays as it is: the dropped states' information goes over to
   *  their neighbours, and measurements that read them can no longer be withdrawn or replaced.
   *  @throws {UnknownStateError | DisposedError | CommitUnderWayError} */
  forget(states: readonly StateId[]): void {
    this.#requireIdle("forget");
    for (const state of states) if (this.#dimensionOf(state) === undefined) throw new UnknownStateError(state, "forget");
    for (const state of states) this.#forgotten.add(state);
  }

  /**
   * Lets everything pending count, all or nothing: when it throws, the estimate is as it was and what was pending is still pending.
   * New states that their measurements define given older states become leaves, other rows enter the ledger; when carrying on has cost
   * as much as a new factor of the whole would, one is made. The report says which and why.
   * @throws {UndeterminedError} states that the measurements do not determine, by id and name, and how they can move.
   * @throws {MemoryLimitError | DisposedError | CommitUnderWayError}
   * Cost: the paths from the states read to the root of the elimination tree; for a new base, its factor.
   * Sources: Woodbury (1950); see the kernel's ledger.
   */
  commit(): CommitReport {
    this.#requireIdle("commit");
    const plus: OwnedRows[] = [];
    const minus: OwnedRows[] = [];
    for (const measurement of this.#added) plus.push({ rows: this.#measurements[measurement]!.rows, measurement });
    for (const measurement of this.#withdrawn) minus.push({ rows: this.#measurements[measurement]!.rows, measurement });
    for (const [measurement, rows] of this.#replaced) {
      minus.push({ rows: this.#measurements[measurement]!.rows, measurement });
      plus.push({ rows, measurement });
    }
    const newStates = this.#newStates;
    if (newStates.length + plus.length + minus.length + this.#forgotten.size === 0)
      return { ...this.#report(), route: "none", because: "nothing was pending", predictedFlops: 0, countedFlops: 0 };
    this.#busy = true;
    let outcome: Outcome | undefined;
    try {
      if (newStates.length + plus.length + minus.length > 0) {
        const measurements = this.#inForce + this.#added.length - this.#withdrawn.size;
        const column = this.#trackedColumn(false);
        outcome = this.#engine.apply({ newStates, plus, minus }, () => this.#world(true), measurements, this.#track === "all", column);
      }
    } catch (error) {
      if (error instanceof SingularBatch) throw this.#undetermined();
      throw error;
    } finally {
      this.#busy = false;
    }
    this.#settle();
    return {
      ...this.#report(),
      route: outcome?.route ?? "ledger",
      because: outcome?.because ?? "states were forgotten; their information stays with their neighbours",
      predictedFlops: outcome?.predictedFlops ?? 0,
      countedFlops: outcome?.countedFlops ?? 0,
    };
  }

  /** Everything pending has been applied: the books follow. Nothing here can fail. */
  #settle(): void {
    for (const state of this.#newStates) this.#states[state]!.standing = "committed";
    for (const measurement of this.#added) this.#measurements[measurement]!.standing = "committed";
    for (const measurement of this.#withdrawn) this.#measurements[measurement]!.standing = "withdrawn";
    for (const [measurement, rows] of this.#replaced) this.#measurements[measurement]!.rows = rows;
    this.#inForce += this.#added.length - this.#withdrawn.size;
    this.#alive += this.#newStates.length;
    if (this.#forgotten.size > 0) this.#absorb([...this.#forgotten]);
    this.#newStates = [];
    this.#added = [];
    this.#withdrawn = new Set();
    this.#replaced = new Map();
    this.#forgotten = new Set();
    this.#solution = undefined;
  }

  /** Condenses all rows that read the forgotten states into rows on their neighbours. */
  #absorb(states: StateId[]): void {
    const gone = new Set(states);
    const reads = (rows: WhitenedRows) => rows.states.some((state) => gone.has(state));
    const rows = this.#condensed.filter(reads);
    for (const record of this.#measurements) {
      if (record.standing !== "committed" || !reads(record.rows)) continue;
      rows.push(record.rows);
      record.standing = "absorbed";
      this.#inForce -= 1;
    }
    const rest = absorbStates(states, rows, (state) => this.#states[state]!.dimension);
    this.#condensed = this.#condensed.filter((r) => !reads(r));
    if (rest) this.#condensed.push(rest);
    for (const state of states) this.#states[state]!.standing = "forgotten";
    if (typeof this.#column === "number" && gone.has(this.#column)) this.#column = undefined;
    this.#alive -= states.length;
  }

  /** States and rows in force: after what is pending (for the commit that brings it in), or as last committed. */
  #world(pending: boolean): World {
    const states: StateId[] = [];
    for (const [id, { standing }] of this.#states.entries()) {
      if (standing === "committed" || (pending && standing === "pending")) states.push(id);
    }
    const rows: WhitenedRows[] = [...this.#condensed];
    for (const [id, record] of this.#measurements.entries()) {
      if (record.standing === "committed") {
        if (!pending) rows.push(record.rows);
        else if (!this.#withdrawn.has(id)) rows.push(this.#replaced.get(id) ?? record.rows);
      } else if (record.standing === "pending" && pending) rows.push(record.rows);
    }
    return { states, rows };
  }

  #undetermined(): UndeterminedError {
    const { states } = this.#world(true);
    return new UndeterminedError(states, [], [], "The measurements do not determine all states.");
  }

  /** Keeps the marginals of all states current, and one block column of Σ (that of a state, or of whatever state is newest), or none.
   *  They are brought up to date when they are read, by what has changed since; a list of states asks for these alone on demand.
   *  @throws {UnknownStateError | OptionError | DisposedError | CommitUnderWayError} */
  track(states: "all" | "none", options: { column?: StateId | "newest" | undefined } = {}): void {
    this.#requireIdle("track");
    requireWord("track", states, ["all", "none"]);
    requireKnownOptions("track", options, ["column"]);
    const { column } = options;
    if (column !== undefined && column !== "newest" && this.#dimensionOf(column) === undefined) throw new UnknownStateError(column, "track");
    this.#track = states;
    this.#column = column;
  }

  /** The correction to the linearization point: of all states one after another in order of arrival, or of one state.
   *  Cost: all: one backward solve, once a commit; one: its path to the root. */
  solution(state?: StateId): Float64Array {
    this.#requireIdle("solution");
    if (state !== undefined) {
      const slot = this.#slotOf(state, "solution");
      if (!this.#solution) {
        let value = new Float64Array(0) as Float64Array;
        eachMarginal(this.#engine.system, [slot], (_k, _block, x) => {
          value = x;
        });
        return value;
      }
      return this.#partOfSolution(slot);
    }
    const { system } = this.#ready();
    this.#solution ??= system.estimate();
    const parts = this.#committedStates().map((id) => this.#partOfSolution(system.slotOf(id)));
    const all = new Float64Array(parts.reduce((sum, part) => sum + part.length, 0));
    let at = 0;
    for (const part of parts) {
      all.set(part, at);
      at += part.length;
    }
    return all;
  }

  #partOfSolution(slot: number): Float64Array {
    const { system } = this.#engine;
    return this.#solution!.slice(system.positionOf(slot), system.positionOf(slot + 1));
  }

  /** The covariance of one state, d × d. Cost: kept current: none; else its path to the root. */
  marginal(state: StateId): Float64Array {
    this.#requireIdle("marginal");
    return this.#marginalOf([this.#slotOf(state, "marginal")])[0]!;
  }

  /** The covariances of the states asked for (all unless told), each d × d, one after another.
   *  Cost: when all are kept, what has changed since the last reading; else a path each. */
  marginals(states?: readonly StateId[]): Float64Array {
    this.#requireIdle("marginals");
    const { system } = this.#ready();
    const wanted = states ?? this.#committedStates();
    const slots = wanted.map((state) => this.#slotOf(state, "marginals"));
    // A new base would renumber the slots, so bring the kept numbers up to date before using any.
    if (this.#track === "all" && (!states || states.length > this.#alive / 8)) this.#refresh();
    const now = this.#engine.system === system ? slots : wanted.map((state) => this.#engine.system.slotOf(state));
    return concatenate(this.#marginalOf(now));
  }

  #refresh(): void {
    this.#engine.refresh(() => this.#world(false), this.#trackedColumn(true), this.#tolerance);
  }

  #marginalOf(slots: readonly number[]): Float64Array[] {
    const { system, tracked } = this.#engine;
    if (tracked.valid && tracked.owed(system) === 0 && system.removed === 0 && slots.every((slot) => slot < tracked.slots)) {
      this.#requireSure(this.#engine.trackedBound);
      return slots.map((slot) => tracked.block(slot));
    }
    this.#requireSure(this.#engine.baseBound);
    const blocks: Float64Array[] = [];
    eachMarginal(system, slots, (k, block) => {
      blocks[k] = block;
    });
    return blocks;
  }

  /** Σ[a, b], dimension of a × dimension of b, row-major. Cost: both paths to the root. */
  crossCovariance(a: StateId, b: StateId): Float64Array {
    this.#requireIdle("crossCovariance");
    const slots = [this.#slotOf(a, "crossCovariance"), this.#slotOf(b, "crossCovariance")] as const;
    const { system } = this.#engine;
    this.#requireSure(this.#engine.baseBound);
    const joint = jointCovariance(system, slots);
    const [da, db] = [system.dimensionAt(slots[0]), system.dimensionAt(slots[1])];
    const block = new Float64Array(da * db);
    for (let i = 0; i < da; i += 1) for (let j = 0; j < db; j += 1) block[i * db + j] = joint[i * (da + db) + da + j]!;
    return block;
  }

  /** The joint covariance of several states in the order given, row-major. Cost: their paths to the root. */
  jointMarginal(states: readonly StateId[]): Float64Array {
    this.#requireIdle("jointMarginal");
    const slots = states.map((state) => this.#slotOf(state, "jointMarginal"));
    this.#requireSure(this.#engine.baseBound);
    return jointCovariance(this.#engine.system, slots);
  }

  /** The block column of Σ at one state: order × dimension, column-major, states in order of arrival.
   *  Cost: kept by `track`: what has changed; else one forward and one backward solve. */
  blockColumn(state: StateId): Float64Array {
    this.#requireIdle("blockColumn");
    this.#slotOf(state, "blockColumn");
    if (this.#track === "all" && this.#trackedColumn(true) === state) this.#refresh();
    const { system, tracked } = this.#engine;
    const slot = system.slotOf(state);
    const d = system.dimensionAt(slot);
    const kept = tracked.isCurrent(system, state) ? tracked.wholeColumn(system, d) : undefined;
    this.#requireSure(kept ? this.#engine.trackedBound : this.#engine.baseBound);
    const ids = this.#committedStates();
    const parts = kept ? [] : crossBlocks(system, slot, ids.map((id) => system.slotOf(id)));
    const order = ids.reduce((sum, id) => sum + this.#states[id]!.dimension, 0);
    const column = new Float64Array(order * d);
    let row = 0;
    for (const [k, id] of ids.entries()) {
      const at = kept ? system.positionOf(system.slotOf(id)) * d : 0;
      const from = kept ?? parts[k]!;
      for (let u = 0; u < this.#states[id]!.dimension; u += 1, row += 1)
        for (let j = 0; j < d; j += 1) column[j * order + row] = from[at + u * d + j]!;
    }
    return column;
  }

  dispose(): void {
    this.#handle.dispose();
  }
  [Symbol.dispose](): void {
    this.dispose();
  }

  #report() {
    return {
      states: this.#alive,
      measurements: this.#inForce,
      bound: this.#engine.isEmpty ? Number.EPSILON : this.#track === "all" ? this.#engine.trackedBound : this.#engine.baseBound,
    };
  }

  #requireSure(bound: number): void {
    if (bound > this.#tolerance && this.#onDoubt === "throw") throw new UncertainAnswerError(bound, this.#tolerance);
  }

  #requireIdle(call: string): void {
    void this.#handle.address;
    if (this.#busy) throw new CommitUnderWayError(call);
  }

  #ready(): Engine {
    if (this.#engine.isEmpty) throw new NotCommittedError(0);
    return this.#engine;
  }

  #committedStates(): StateId[] {
    const ids: StateId[] = [];
    for (const [id, { standing }] of this.#states.entries()) if (standing === "committed") ids.push(id);
    return ids;
  }

  /** The state whose column is kept, −1: none. committed: as of the last commit, else counting pending states. */
  #trackedColumn(committed: boolean): number {
    if (this.#column === undefined) return -1;
    if (this.#column !== "newest") return this.#column;
    for (let id = this.#states.length - 1; id >= 0; id -= 1) {
      const { standing } = this.#states[id]!;
      if (standing === "committed" || (!committed && standing === "pending")) return id;
    }
    return -1;
  }

  #dimensionOf(state: StateId): number | undefined {
    const record = this.#states[state];
    return record && record.standing !== "forgotten" && !this.#forgotten.has(state) ? record.dimension : undefined;
  }

  #slotOf(state: StateId, call: string): number {
    const record = this.#states[state];
    if (!record || record.standing === "forgotten") throw new UnknownStateError(state, call);
    if (record.standing === "pending") throw new NotCommittedError(state);
    return this.#engine.system.slotOf(state);
  }

  #inForceRecord(measurement: MeasurementId): MeasurementRecord {
    const record = this.#measurements[measurement];
    if (!record) throw new UnknownMeasurementError(measurement, "was never added");
    if (record.standing === "withdrawn" || this.#withdrawn.has(measurement))
      throw new UnknownMeasurementError(measurement, "was withdrawn already");
    if (record.standing === "absorbed" || record.rows.states.some((state) => this.#forgotten.has(state)))
      throw new UnknownMeasurementError(measurement, "reads a forgotten state, which has taken its information along");
    return record;
  }
}

function concatenate(parts: readonly Float64Array[]): Float64Array {
  const all = new Float64Array(parts.reduce((sum, part) => sum + part.length, 0));
  let at = 0;
  for (const part of parts) {
    all.set(part, at);
    at += part.length;
  }
  return all;
}
