// The estimate: states and measurements as they come and go, and how sure every state is after each commit.
import { Handle } from "../../bindings/handle.js";
import { runSteps, runStepsInSlices, type SliceOptions, type Steps } from "../../bindings/slices.js";
import { NotPositiveDefiniteError, OptionError } from "../errors.js";
import { factorize } from "../matrix/factorize.js";
import { type Route, routes } from "../matrix/routes.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import { requireIndex, requireKnownOptions, requireLength, requireWord } from "../support/checks.js";
import { absorb } from "./absorb.js";
import { ArrivalOrder } from "./arrival.js";
import type { Singular } from "./base.js";
import { boundOfNoise } from "./bound.js";
import {
  CommitUnderWayError,
  NotCommittedError,
  SnapshotError,
  UncertainAnswerError,
  UndeterminedError,
  UnknownMeasurementError,
} from "./commit-errors.js";
import { type Condensed, condense } from "./condense.js";
import { Engine, type Outcome, SingularBatch } from "./engine.js";
import { UnknownStateError } from "./errors.js";
import { type Evaluation, evaluate } from "./evaluate.js";
import { assembleInformation, type Information } from "./information.js";
import { eachMarginal, jointCovariance, wholeColumn } from "./marginals.js";
import { restoreColumns } from "./noise.js";
import type { MeasurementRecord, StateRecord } from "./records.js";
import { allRedundancies } from "./redundancy.js";
import { type CheckedMeasurement, type Linearization, type MeasurementInput, relinearize, type StateId, whiten } from "./rows.js";
import type { Matrix } from "./small-matrix.js";
import { decodeSnapshot, type EstimateContents, encodeSnapshot } from "./snapshot.js";
import type { OwnedRows, World } from "./system.js";
import { findUndetermined } from "./undetermined.js";
import type { WhitenedRows } from "./whitened.js";

export type MeasurementId = number;

export interface EstimateOptions {
  /** Whether the marginals of all states are kept current; see `track`. Default `"none"`. */
  track?: "all" | "none" | undefined;
  /** The largest bound on its error, relative to its trace, that a marginal may carry before a question about it throws. Default 1e-6. */
  tolerance?: number | undefined;
  /** What a question does when its bound passes the tolerance. Default `"throw"`; with `"answer"` see `health().bound`. */
  onDoubt?: "throw" | "answer" | undefined;
  /** Milliseconds that a commit may take before a new base is built in slices, over several commits, while the old one goes on. */
  latencyBudget?: number | undefined;
  /** Bytes that the factor may take; a commit that would need more is refused. Default: what the kernel's own limit leaves. */
  memoryLimit?: number | undefined;
  /** How a new base is factored. `"information"`: Cholesky of the information matrix, whose condition is the square of that of the whitened
   *  rows. `"orthogonal"`: reflections of the rows themselves, which keep twice the digits for 2.5 to 5 times the work. `"automatic"`, the
   *  default: the first, unless it fails or its condition leaves fewer than eight digits. Rows whose columns have squared norms beyond 2^±900
   *  take the first whatever was asked for. `because` of a commit says which and why. */
  route?: Route | undefined;
}

export interface CommitReport {
  /** `"none"`: nothing was pending. `"ledger"`: the base stays. `"rebase"`: a new base was factored. */
  readonly route: "none" | "ledger" | "rebase";
  /** Why this route, in words. */
  readonly because: string;
  /** States and measurements in force after the commit. */
  readonly states: number;
  readonly measurements: number;
  /** Flops that the route was expected to take: of a new base its factor, of the ledger what rows have taken before; and those counted. */
  readonly predictedFlops: number;
  readonly countedFlops: number;
  /** A bound on the error of every marginal read until the next commit, by whichever way: no entry of a block is off by more than this times
   *  the trace of the block, the sum of its variances. Infinite where nothing can be said.
   *  It is made of the condition of the base and of the leaves, each scaled to unit diagonal, of what later measurements have made smaller
   *  and withdrawals larger, and for kept blocks of their largest past trace ÷ their present one; see `bound.ts` for the formula and its
   *  sources. Noise given as a matrix adds its own condition, and forgetting states the bound at that moment. Its constants and the estimate
   *  of the condition are measured, not proven: on random networks with weights 12 orders of magnitude apart, 119 000 readings, the largest
   *  error was 0.51 of the bound. Systems that are badly conditioned but kindly so may be much better than it says.
   *  Not in it: how well the given Jacobians and noise describe what was measured.
   *  Cost: a few per cent of a new base; of other commits the ledger's rows. */
  readonly bound: number;
}

/** How far the numbers of an estimate can be trusted. */
export interface Health {
  /** Estimate of the condition number of the information matrix; infinite when f64 cannot factor it. */
  readonly condition: number;
  /** A bound on the error of every marginal read until the next commit; see `CommitReport.bound`. It may have come down since the commit,
   *  when a reading has brought kept blocks up to date or taken a new base. */
  readonly bound: number;
  readonly tolerance: number;
  /** Largest relative difference between sampled kept blocks and fresh ones. */
  readonly drift: number;
  /** Largest past trace of a kept block ÷ its trace now: what subtraction has cost in digits. */
  readonly traceRatio: number;
  readonly ledgerRows: number;
  readonly ledgerBytes: number;
  readonly leaves: number;
  /** How the factor of the base at hand was made, and why. */
  readonly baseRoute: "information" | "orthogonal";
  readonly baseBecause: string;
  /** Why a new base that would pay was not taken, if so. */
  readonly refusal: string | undefined;
}

export interface EstimateStatistics {
  readonly states: number;
  /** Unknowns. */
  readonly order: number;
  readonly measurements: number;
  /** Flops, entries of L and bytes of the base's factor. */
  readonly baseFlops: number;
  readonly baseNonzeros: number;
  readonly baseBytes: number;
  /** Bytes of the ledger and leaves beyond it. */
  readonly ledgerBytes: number;
}

/** Rows of a forgotten state are rotated onto its neighbours; what that costs is taken to be this times the bound on fresh blocks at that
 *  moment. Not analysed: with 1 in its place the largest error among 60 000 readings of random networks that forget states now and then was 0.98 of the bound. */
const FORGETTING = 4;

/** From so many candidates on, kept marginals are brought up to date for them. */
const MANY_CANDIDATES = 16;

const optionNames = ["track", "tolerance", "onDoubt", "latencyBudget", "memoryLimit", "route"];

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
  /** Weighted squares and degrees of freedom that have gone with them. */
  #absorbedSquares = 0;
  #absorbedFreedom = 0;
  /** What rotation has done to the rows that forgotten states left behind. */
  #absorbedBound = 0;
  /** The worst conditioned noise in force. */
  #noiseCondition = 1;
  /** States in force, in order of arrival: the same array while none is forgotten. */
  #committed: StateId[] = [];
  /** Their unknowns, and the numbers of their blocks. */
  #order = 0;
  #blockNumbers = 0;
  readonly #arrival = new ArrivalOrder();
  #newStates: StateId[] = [];
  #added: MeasurementId[] = [];
  #withdrawn = new Set<MeasurementId>();
  #replaced = new Map<MeasurementId, CheckedMeasurement>();
  #forgotten = new Set<StateId>();
  #inForce = 0;
  #alive = 0;
  #track: "all" | "none" = "none";
  /** The states that `marginals()` gives when a list was tracked. */
  #chosen: StateId[] | undefined;
  #column: StateId | "newest" | undefined;
  #busy = false;
  readonly #tolerance: number;
  readonly #onDoubt: "throw" | "answer";
  readonly #latencyBudget: number | undefined;
  readonly #memoryLimit: number;
  readonly #route: Route;
  readonly #engine: Engine;
  readonly #handle: Handle;
  #solution: Float64Array | undefined;

  constructor(options: EstimateOptions = {}) {
    requireKnownOptions("Estimate", options, optionNames);
    const { track = "none", tolerance = 1e-6, onDoubt = "throw", latencyBudget } = options;
    const { memoryLimit = Number.POSITIVE_INFINITY, route = "automatic" } = options;
    requireWord("track", track, ["all", "none"]);
    requireWord("onDoubt", onDoubt, ["throw", "answer"]);
    requireWord("route", route, routes);
    if (!(tolerance > 0)) throw new OptionError(`tolerance is ${tolerance}: it must be a number greater than 0.`, { tolerance });
    if (latencyBudget !== undefined && !(latencyBudget > 0))
      throw new OptionError(`latencyBudget is ${latencyBudget}: it must be a number of milliseconds greater than 0.`, { latencyBudget });
    if (!(memoryLimit > 0))
      throw new OptionError(`memoryLimit is ${memoryLimit}: it must be a number of bytes greater than 0.`, { memoryLimit });
    this.#track = track;
    this.#tolerance = tolerance;
    this.#onDoubt = onDoubt;
    this.#latencyBudget = latencyBudget;
    this.#memoryLimit = memoryLimit;
    this.#route = route;
    const states = this.#states;
    const engine = new Engine((state) => states[state]!.dimension, latencyBudget, memoryLimit, route);
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
    return runSteps(this.#commitSteps());
  }

  /** `commit` whose new base, if it takes one, is factored in slices, between which the thread's other work goes on.
   *  @param options signal: an abort leaves the estimate as it was, with what was pending still pending, and rejects with its reason;
   *    onProgress: told fractions of a new base. Questions and changes throw until it has ended. */
  async commitAsync(options: SliceOptions = {}): Promise<CommitReport> {
    requireKnownOptions("commitAsync", options, ["signal", "onProgress"]);
    return runStepsInSlices(this.#commitSteps(), options);
  }

  *#commitSteps(): Steps<CommitReport> {
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
        outcome = yield* this.#engine.apply(
          { newStates, plus, minus },
          () => this.#world(true),
          measurements,
          this.#track === "all",
          column,
        );
      }
    } catch (error) {
      if (error instanceof SingularBatch) throw this.#undetermined(error.where);
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

  /** Drops everything pending, as when a commit was refused: states and measurements added since the last one are gone, withdrawals,
   *  replacements and forgets are called off. */
  discard(): void {
    this.#requireIdle("discard");
    for (const state of this.#newStates) this.#states[state]!.standing = "forgotten";
    for (const measurement of this.#added) this.#measurements[measurement]!.standing = "withdrawn";
    this.#newStates = [];
    this.#added = [];
    this.#withdrawn = new Set();
    this.#replaced = new Map();
    this.#forgotten = new Set();
  }

  /** Everything pending has been applied: the books follow. Nothing here can fail. */
  #settle(): void {
    for (const state of this.#newStates) {
      this.#states[state]!.standing = "committed";
      this.#takeIn(state);
    }
    for (const measurement of this.#added) this.#measurements[measurement]!.standing = "committed";
    for (const measurement of this.#withdrawn) this.#measurements[measurement]!.standing = "withdrawn";
    for (const [measurement, rows] of this.#replaced) this.#measurements[measurement]!.rows = rows;
    this.#followNoise();
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

  #takeIn(state: StateId): void {
    const { dimension } = this.#states[state]!;
    this.#committed.push(state);
    this.#order += dimension;
    this.#blockNumbers += dimension ** 2;
  }

  /** A new linearization has the noise of the one before. */
  #followNoise(): void {
    const conditionOf = (measurement: MeasurementId): number => this.#measurements[measurement]!.rows.noise.condition;
    let worst = this.#noiseCondition;
    for (const measurement of this.#withdrawn) if (conditionOf(measurement) > 1 && conditionOf(measurement) === worst) worst = 1;
    if (worst < this.#noiseCondition) {
      for (const { rows, standing } of this.#measurements)
        if (standing === "committed" || standing === "absorbed") worst = Math.max(worst, rows.noise.condition);
    }
    for (const measurement of this.#added) worst = Math.max(worst, conditionOf(measurement));
    this.#noiseCondition = worst;
  }

  /** Condenses all rows that read the forgotten states into rows on their neighbours. */
  #absorb(states: StateId[]): void {
    this.#absorbedBound = Math.max(this.#absorbedBound, FORGETTING * this.#engine.baseBound);
    const gone = new Set(states);
    const reads = (rows: WhitenedRows) => rows.states.some((state) => gone.has(state));
    const rows = this.#condensed.filter(reads);
    for (const record of this.#measurements) {
      if (record.standing !== "committed" || !reads(record.rows)) continue;
      rows.push(record.rows);
      record.standing = "absorbed";
      this.#inForce -= 1;
    }
    const left = absorb(states, rows, (state) => this.#states[state]!.dimension);
    this.#absorbedSquares += left.squares;
    this.#absorbedFreedom += left.redundancy;
    this.#condensed = [...this.#condensed.filter((r) => !reads(r)), ...left.rows];
    for (const state of states) {
      const { dimension } = this.#states[state]!;
      this.#states[state]!.standing = "forgotten";
      this.#order -= dimension;
      this.#blockNumbers -= dimension ** 2;
    }
    this.#committed = this.#committed.filter((state) => !gone.has(state));
    this.#chosen = this.#chosen?.filter((state) => !gone.has(state));
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

  /** Why what is pending cannot count: the states that it would leave free to move. */
  #undetermined(where: Singular | undefined): UndeterminedError | NotPositiveDefiniteError {
    const { states, rows } = this.#world(true);
    const facts = states.map((id) => ({ id, dimension: this.#states[id]!.dimension, name: this.#states[id]!.name }));
    const found = findUndetermined(facts, rows);
    return found ? new UndeterminedError(found) : new NotPositiveDefiniteError(where?.unknown ?? 0, where?.pivot ?? 0);
  }

  /** Keeps the marginals of all states current, and one block column of Σ (that of a state, or of whatever state is newest), or none.
   *  They are brought up to date when they are read, by what has changed since. A list makes `marginals()` give these states alone,
   *  each by its own path, which is exact at any time and cheaper while the list is short.
   *  @throws {UnknownStateError | OptionError | DisposedError | CommitUnderWayError} */
  track(states: readonly StateId[] | "all" | "none", options: { column?: StateId | "newest" | undefined } = {}): void {
    this.#requireIdle("track");
    if (typeof states === "string") requireWord("track", states, ["all", "none"]);
    else for (const state of states) if (this.#dimensionOf(state) === undefined) throw new UnknownStateError(state, "track");
    requireKnownOptions("track", options, ["column"]);
    const { column } = options;
    if (column !== undefined && column !== "newest" && this.#dimensionOf(column) === undefined)
      throw new UnknownStateError(column, "track");
    this.#track = states === "all" ? "all" : "none";
    this.#chosen = typeof states === "string" ? undefined : [...states];
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
    this.#ready();
    const x = this.#wholeSolution();
    const all = new Float64Array(this.#arrange().order);
    this.#arrival.columnInto(all, x, 1);
    return all;
  }

  /** The order of arrival, up to date. */
  #arrange(): ArrivalOrder {
    this.#arrival.follow(this.#engine.system, this.#committed);
    return this.#arrival;
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

  /** The covariances of the states asked for (unless told, all, or those of a tracked list), each d × d, one after another.
   *  @param into your array of that length, filled and returned: a fresh one of a large network costs more than its numbers.
   *  Cost: when all are kept, what has changed since the last reading; else a path each. */
  marginals(states?: readonly StateId[], into?: Float64Array): Float64Array {
    this.#requireIdle("marginals");
    this.#ready();
    const wanted = states ?? this.#chosen ?? this.#committed;
    for (const state of wanted === this.#committed ? [] : wanted) this.#slotOf(state, "marginals");
    // Before slots are looked up: a new base renumbers them.
    if (this.#track === "all" && wanted.length > this.#alive / 8) this.#refresh();
    const { system, tracked } = this.#engine;
    if (wanted === this.#committed && this.#isKept(system.slots)) {
      this.#requireSure(this.#engine.trackedBound);
      const all = target("into", into, this.#blockNumbers);
      tracked.blocksInto(all, system, wanted);
      return all;
    }
    return concatenate(this.#marginalOf(wanted.map((state) => system.slotOf(state))), into);
  }

  /** Whether the kept blocks of slots below `slots` include all rows, and are as good as they have to be. */
  #isKept(slots: number): boolean {
    const { system, tracked } = this.#engine;
    return tracked.valid && tracked.owed(system) === 0 && slots <= tracked.slots && this.#engine.keptAreGood(this.#tolerance);
  }

  #refresh(): void {
    const { system } = this.#engine;
    this.#engine.refresh(() => this.#world(false), this.#trackedColumn(true), this.#tolerance);
    if (this.#engine.system !== system) this.#solution = undefined; // it was in the old base's positions
  }

  #marginalOf(slots: readonly number[]): Float64Array[] {
    const { system, tracked } = this.#engine;
    if (this.#isKept(slots.reduce((most, slot) => Math.max(most, slot + 1), 0))) {
      this.#requireSure(this.#engine.trackedBound);
      return slots.map((slot) => tracked.block(system, slot));
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
   *  @param into your array of that length, filled and returned.
   *  Cost: kept by `track`: what has changed; else one forward and one backward solve. */
  blockColumn(state: StateId, into?: Float64Array): Float64Array {
    this.#requireIdle("blockColumn");
    this.#slotOf(state, "blockColumn");
    if (this.#track === "all" && this.#trackedColumn(true) === state) this.#refresh();
    const { system, tracked } = this.#engine;
    const slot = system.slotOf(state);
    const d = system.dimensionAt(slot);
    const kept = tracked.isCurrent(system, state);
    this.#requireSure(kept ? this.#engine.trackedBound : this.#engine.baseBound);
    const column = target("into", into, this.#order * d);
    if (kept) tracked.columnInto(column, system, this.#committed);
    else this.#arrange().columnInto(column, wholeColumn(system, slot), d);
    return column;
  }

  /** J Σ Jᵀ of a linear function of two states: the covariance of its value under the given Jacobians (rows × dimension each), row-major.
   *  For the difference of two points give −I and I. Cost: both paths to the root. */
  relativeCovariance(a: StateId, b: StateId, jacobianA: Matrix, jacobianB: Matrix): Float64Array {
    this.#requireIdle("relativeCovariance");
    const { length: rows } = Array.isArray(jacobianA) ? jacobianA : { length: jacobianA.length / (this.#dimensionOf(a) ?? 1) };
    const input = {
      states: [a, b],
      jacobians: [jacobianA, jacobianB],
      residual: new Float64Array(rows),
      standardDeviations: new Float64Array(rows).fill(1),
    };
    const { blocks, states } = whiten(input, (state) => this.#dimensionOf(state));
    for (const state of states) this.#slotOf(state, "relativeCovariance");
    this.#requireSure(this.#engine.baseBound);
    const { system } = this.#engine;
    system.begin(rows);
    system.loadRows(0, { states, rows, blocks, residual: input.residual });
    system.forward();
    const covariance = system.gram(rows);
    system.clear();
    return covariance;
  }

  /**
   * What measurements would tell if they were added, without adding them.
   * @param candidate one, or thousands: they share their solves.
   * @returns for each: innovation ν, its covariance S = J Σ Jᵀ + R, νᵀ S⁻¹ ν, and the information gain ½ log det (R⁻¹ S) in nats.
   * @throws as `addMeasurement`. Cost: a path for each distinct state, shared; little when marginals are kept.
   * Source: Kalman (1960); the gain: Shannon entropy of a Gaussian.
   */
  evaluate(candidate: MeasurementInput): Evaluation;
  evaluate(candidates: readonly MeasurementInput[]): Evaluation[];
  evaluate(input: MeasurementInput | readonly MeasurementInput[]): Evaluation | Evaluation[] {
    this.#requireIdle("evaluate");
    const list = (Array.isArray(input) ? input : [input]) as readonly MeasurementInput[];
    const candidates = list.map((candidate) => whiten(candidate, (state) => this.#dimensionOf(state)));
    for (const { states } of candidates) for (const state of states) this.#slotOf(state, "evaluate");
    this.#ready();
    // Kept numbers that are brought up to date serve the next questions, too.
    if (this.#track === "all" && candidates.length >= MANY_CANDIDATES) this.#refresh();
    const { system, tracked } = this.#engine;
    const current = this.#track === "all" && tracked.isCurrent(system, this.#trackedColumn(true)) ? tracked : undefined;
    this.#requireSure(current ? this.#engine.trackedBound : this.#engine.baseBound);
    const results = evaluate(system, candidates, () => this.#wholeSolution(), current);
    return Array.isArray(input) ? results : results[0]!;
  }

  #wholeSolution(): Float64Array {
    this.#solution ??= this.#engine.system.estimate();
    return this.#solution;
  }

  /** Residuals after the adjustment, measured minus predicted at the solution, in each measurement's units: of one measurement, or of all
   *  in force one after another in order of arrival. */
  residuals(measurement?: MeasurementId): Float64Array {
    this.#requireIdle("residuals");
    const records = measurement === undefined ? this.#committedMeasurements() : [this.#committedRecord(measurement)];
    return concatenate(
      records.map(({ rows }) => {
        const v = this.#whiteResidual(rows);
        restoreColumns(rows.noise, rows.rows, v);
        return v;
      }),
    );
  }

  #whiteResidual({ states, blocks, rows, residual }: WhitenedRows): Float64Array {
    const { system } = this.#ready();
    const x = this.#wholeSolution();
    const v = residual.slice();
    for (const [k, state] of states.entries()) {
      const first = system.positionOf(system.slotOf(state));
      const block = blocks[k]!;
      for (let u = 0; u < block.length / rows; u += 1) for (let q = 0; q < rows; q += 1) v[q]! -= block[u * rows + q]! * x[first + u]!;
    }
    return v;
  }

  /** The a posteriori variance factor: Σ vᵀ R⁻¹ v ÷ degrees of freedom, with both; NaN when there is none.
   *  Expected 1 when the stated noise is right. */
  varianceFactor(): { factor: number; weightedSquares: number; degreesOfFreedom: number } {
    this.#requireIdle("varianceFactor");
    let weightedSquares = this.#absorbedSquares;
    let degreesOfFreedom = this.#absorbedFreedom - this.#order;
    for (const rows of [...this.#committedMeasurements().map((record) => record.rows), ...this.#condensed]) {
      for (const value of this.#whiteResidual(rows)) weightedSquares += value * value;
      degreesOfFreedom += rows.rows;
    }
    return { factor: degreesOfFreedom > 0 ? weightedSquares / degreesOfFreedom : Number.NaN, weightedSquares, degreesOfFreedom };
  }

  /** The redundancy of one measurement: its rows − tr(J Σ Jᵀ R⁻¹), from 0 (no other controls it) to its rows. Cost: its paths. */
  redundancy(measurement: MeasurementId): number {
    this.#requireIdle("redundancy");
    const { rows } = this.#committedRecord(measurement);
    this.#requireSure(this.#engine.baseBound);
    const { system } = this.#ready();
    system.begin(rows.rows);
    system.loadRows(0, rows);
    system.forward();
    const gram = system.gram(rows.rows);
    system.clear();
    let redundancy = rows.rows;
    for (let q = 0; q < rows.rows; q += 1) redundancy -= gram[q * rows.rows + q]!;
    return redundancy;
  }

  /** The redundancy of every measurement in force, in order of arrival. They add up to the degrees of freedom.
   *  Cost: one factor and one selected inverse for all. */
  redundancies(): Float64Array {
    this.#requireIdle("redundancies");
    this.#ready();
    const { information, place } = this.#informationNow();
    return allRedundancies(
      information,
      place,
      this.#committedMeasurements().map(({ rows }) => rows),
    );
  }

  #informationNow(): { information: Information; place: (state: number) => number } {
    const { states, rows } = this.#world(false);
    const places: number[] = [];
    for (const [k, state] of states.entries()) places[state] = k;
    const place = (state: number): number => places[state]!;
    return {
      information: assembleInformation(
        Int32Array.from(states, (state) => this.#states[state]!.dimension),
        place,
        rows,
      ),
      place,
    };
  }

  /** The information of the whole on the states in `keep` alone, whatever the others are: K × K row-major, and its vector, in the order of
   *  `keep`. Two parts of a network condensed to the states they share add up to the condensed whole (Helmert blocking).
   *  @throws {UnknownStateError | NotCommittedError}  Cost: a factorization of the others and K + 1 solves. */
  condense(keep: readonly StateId[]): Condensed {
    this.#requireIdle("condense");
    for (const state of keep) this.#slotOf(state, "condense");
    const { states, rows } = this.#world(false);
    return condense(keep, states, rows, (state) => this.#states[state]!.dimension);
  }

  /** log det of the information matrix. Cost: a logarithm an unknown; a factor while forgotten states are still in the base. */
  logDeterminant(): number {
    this.#requireIdle("logDeterminant");
    const { system } = this.#ready();
    if (system.slots === this.#alive) return system.logDeterminant();
    const { order, columnPointers, rowIndices, values, blockSizes } = this.#informationNow().information;
    const factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }), { blockSizes });
    try {
      return factor.logDeterminant();
    } finally {
      factor.dispose();
    }
  }

  /**
   * How far the numbers can be trusted.
   * @param options samples: states whose kept block is compared with a fresh one (default 8, spread evenly).
   * Cost: a factor for the condition (Higham, Tisseur 2000), a path a sample.
   */
  health(options: { samples?: number | undefined } = {}): Health {
    this.#requireIdle("health");
    requireKnownOptions("health", options, ["samples"]);
    const { samples = 8 } = options;
    requireIndex("samples", samples, 0, 1e6);
    const engine = this.#ready();
    const { system, tracked } = engine;
    let drift = 0;
    if (tracked.valid && tracked.owed(system) === 0 && tracked.slots === system.slots) {
      const slots = Array.from({ length: Math.min(samples, system.slots) }, (_, k) =>
        Math.floor((k * system.slots) / Math.min(samples, system.slots)),
      );
      eachMarginal(system, slots, (k, fresh) => {
        const kept = tracked.block(system, slots[k]!);
        const size = Math.max(...fresh.map(Math.abs));
        for (const [at, value] of fresh.entries()) drift = Math.max(drift, Math.abs(kept[at]! - value) / size);
      });
    }
    const { order, columnPointers, rowIndices, values, blockSizes } = this.#informationNow().information;
    let condition = Number.POSITIVE_INFINITY;
    try {
      const factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }), { blockSizes });
      condition = 1 / factor.reciprocalCondition();
      factor.dispose();
    } catch (error) {
      if (!(error instanceof NotPositiveDefiniteError)) throw error; // leaves and ledger can hold what f64 cannot factor
    }
    return {
      condition,
      bound: this.#report().bound,
      tolerance: this.#tolerance,
      drift,
      traceRatio: tracked.valid ? tracked.ratio : 1,
      ledgerRows: system.added + system.removed,
      ledgerBytes: system.bytes,
      leaves: system.slots - system.base.stateOfSlot.length,
      baseRoute: system.base.route,
      baseBecause: system.base.because,
      refusal: engine.refusal,
    };
  }

  /** Sizes and costs of what is held. */
  get statistics(): EstimateStatistics {
    this.#requireIdle("statistics");
    const { flops, nonzeros, bytes } = this.#engine.isEmpty ? { flops: 0, nonzeros: 0, bytes: 0 } : this.#engine.system.base.costs;
    return {
      states: this.#alive,
      order: this.#order,
      measurements: this.#inForce,
      baseFlops: flops,
      baseNonzeros: nonzeros,
      baseBytes: bytes,
      ledgerBytes: this.#engine.isEmpty ? 0 : this.#engine.system.bytes,
    };
  }

  /**
   * All of the estimate as bytes, what is pending included; `restore` makes one of them that goes on from here. Rows that are shared are
   * stored once. A base that is being built within a latency budget is left out: the restored estimate begins it again when it is due.
   * @returns a copy, in the format of a version, little-endian, with a CRC-32 at its end: safe to keep after `dispose()`.
   * @throws {DisposedError | CommitUnderWayError}
   * Cost: a few passes over the rows of all measurements ever added, and over the kept marginals.
   */
  snapshot(): Uint8Array {
    this.#requireIdle("snapshot");
    return encodeSnapshot({
      options: {
        track: this.#track,
        tolerance: this.#tolerance,
        onDoubt: this.#onDoubt,
        latencyBudget: this.#latencyBudget,
        memoryLimit: this.#memoryLimit,
        route: this.#route,
      },
      chosen: this.#chosen,
      column: this.#column,
      states: this.#states,
      measurements: this.#measurements,
      condensed: this.#condensed,
      absorbedSquares: this.#absorbedSquares,
      absorbedFreedom: this.#absorbedFreedom,
      absorbedBound: this.#absorbedBound,
      noiseCondition: this.#noiseCondition,
      newStates: this.#newStates,
      added: this.#added,
      withdrawn: [...this.#withdrawn],
      replaced: [...this.#replaced],
      forgotten: [...this.#forgotten],
      inForce: this.#inForce,
      alive: this.#alive,
      solution: this.#solution,
      engine: this.#engine.save(),
    });
  }

  /**
   * An estimate as it was when `snapshot` was called: on the same kernel build it answers with the same bits and goes on with the same
   * bits. Only when a new base comes may differ: by the clock under a `latencyBudget`, and after a refused commit, whose room in the ledger
   * is not taken again. Ids stay as they were.
   * @param options in place of those saved; what is left out or undefined is as it was.
   * @throws {SnapshotError} bytes that are not a snapshot, cut short, damaged, or of another format version; the checksum finds accidents,
   *   not forgeries. @throws {OptionError | MemoryLimitError} Nothing is held after any of them.
   * Cost: the last base's factor, what the ledger has taken in since, and a few passes over the bytes.
   */
  static restore(bytes: Uint8Array, options: EstimateOptions = {}): Estimate {
    requireKnownOptions("restore", options, optionNames);
    const contents = decodeSnapshot(bytes);
    const given: EstimateOptions = Object.fromEntries(Object.entries(options).filter(([, value]) => value !== undefined));
    const estimate = new Estimate({ ...contents.options, ...given });
    try {
      estimate.#take(given.track === undefined ? contents : { ...contents, chosen: undefined });
    } catch (error) {
      estimate.dispose();
      if (error instanceof SingularBatch)
        throw new SnapshotError("another build", undefined, "its numbers are no longer positive definite as this kernel build rounds them");
      throw error;
    }
    return estimate;
  }

  #take(contents: EstimateContents): void {
    for (const state of contents.states) {
      this.#states.push(state);
      if (state.standing === "committed") this.#takeIn(this.#states.length - 1);
    }
    for (const measurement of contents.measurements) this.#measurements.push(measurement);
    this.#chosen = contents.chosen && [...contents.chosen];
    this.#column = contents.column;
    this.#condensed = [...contents.condensed];
    this.#absorbedSquares = contents.absorbedSquares;
    this.#absorbedFreedom = contents.absorbedFreedom;
    this.#absorbedBound = contents.absorbedBound;
    this.#noiseCondition = contents.noiseCondition;
    this.#newStates = [...contents.newStates];
    this.#added = [...contents.added];
    this.#withdrawn = new Set(contents.withdrawn);
    this.#replaced = new Map(contents.replaced);
    this.#forgotten = new Set(contents.forgotten);
    this.#inForce = contents.inForce;
    this.#alive = contents.alive;
    this.#solution = contents.solution;
    if (contents.engine) this.#engine.restore(contents.engine);
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
      bound: this.#engine.boundOfReadings(this.#track === "all", this.#tolerance) + this.#boundOfRows(),
    };
  }

  /** What the rows themselves had lost before base, leaves and ledger took them in. */
  #boundOfRows(): number {
    return this.#absorbedBound + boundOfNoise(this.#noiseCondition);
  }

  #requireSure(ofEngine: number): void {
    const bound = ofEngine + this.#boundOfRows();
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

  #committedMeasurements(): MeasurementRecord[] {
    return this.#measurements.filter(({ standing }) => standing === "committed");
  }

  #committedRecord(measurement: MeasurementId): MeasurementRecord {
    const record = this.#measurements[measurement];
    if (!record || record.standing === "pending") throw new UnknownMeasurementError(measurement, "was never added");
    if (record.standing === "withdrawn") throw new UnknownMeasurementError(measurement, "was withdrawn already");
    if (record.standing === "absorbed")
      throw new UnknownMeasurementError(measurement, "reads a forgotten state, which has taken its information along");
    return record;
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

/** The caller's array, when there is one of the right length, or a new one. */
function target(what: string, into: Float64Array | undefined, length: number): Float64Array {
  if (into) requireLength(what, into.length, length);
  return into ?? new Float64Array(length);
}

function concatenate(parts: readonly Float64Array[], into?: Float64Array): Float64Array {
  const all = target(
    "into",
    into,
    parts.reduce((sum, part) => sum + part.length, 0),
  );
  let at = 0;
  for (const part of parts) {
    all.set(part, at);
    at += part.length;
  }
  return all;
}
