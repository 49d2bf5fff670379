// What a commit does to base, leaves, ledger and tracked marginals: the route it takes, and back again when it cannot be completed.

import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { part, runSteps, type SlicedCall, type Steps } from "../../bindings/slices.js";
import type { Route } from "../matrix/routes.js";
import { IntList } from "../support/int-list.js";
import { type Base, baseSteps, isSingular, type Singular } from "./base.js";
import { boundOfBase, closedBound } from "./bound.js";
import { assemblySteps } from "./information.js";
import { type Leaf, splitLeaves } from "./leaf.js";
import {
  backwardCost,
  blocksCost,
  carryingCost,
  FIRST_PATH_SHARE,
  keptLimit,
  pathCost,
  rebaseCost,
  rebasePays,
  subtractionSpoils,
} from "./policy.js";
import { countRows, type OwnedRows, System, type SystemEvent, type World } from "./system.js";
import { type SavedTracked, Tracked } from "./tracked.js";
import { findUndetermined } from "./undetermined.js";

/** Share of a new base's work that summing up its information matrix takes, about. */
const ASSEMBLY_SHARE = 0.15;

/** What arrives and leaves in one commit. */
export interface Batch {
  readonly newStates: readonly number[];
  readonly plus: readonly OwnedRows[];
  readonly minus: readonly OwnedRows[];
}

/** All that an engine needs to go on with the same bits. A base that is being built is left out: it is begun again when it is due. */
export interface SavedEngine {
  readonly world: World;
  readonly events: readonly SystemEvent[];
  readonly carried: number;
  readonly refused: number;
  readonly lossRefused: number;
  readonly refusal: string | undefined;
  readonly flopsPerRow: number | undefined;
  readonly tracked: SavedTracked;
}

export interface Outcome {
  readonly route: "ledger" | "rebase";
  readonly because: string;
  readonly predictedFlops: number;
  readonly countedFlops: number;
}

/** The rows do not determine all states. Nothing was changed. */
export class SingularBatch extends Error {
  readonly where: Singular | undefined;
  constructor(where: Singular | undefined) {
    super("the system is singular");
    this.where = where;
  }
}

/** States that may arrive in one commit as leaves; with more, a base is cheaper than so many rotations. */
const MOST_LEAVES = 64;
/** Rows between old states that one commit may bring into the ledger. */
const MOST_ROWS = 192;
/** Removed rows that have made states weaker by this: what is left of one is good to 2e-16 × 1e8, or is rounding alone. */
const SUSPICIOUS_LOSS = 1e8;
/** From this condition on a pivot may be rounding alone: 1 ÷ 500 ε. */
const SUSPICIOUS_CONDITION = 1e13;
/** Bounds below this are never a reason to keep an old base: errors themselves are mostly a hundredth of their bounds. That of a heavy patrol
 *  passes it at some 10 000 poses. */
const HARMLESS = 1e-8;

/** Nanoseconds of work asked for in one go while a budget of time is spent: the most by which a slice may pass it. */
const BACKGROUND_SLICE = 2e5;

/** Marginals that a base expects to be asked for. */
const QUERIES = 1000;

interface Background {
  readonly steps: Steps<Base | Singular>;
  call: SlicedCall | undefined;
  readonly world: World;
  readonly sizes: Int32Array;
  /** Events of the old system that the new one has taken in already. */
  replayed: number;
  next: System | undefined;
}

export class Engine {
  #system: System | undefined;
  readonly tracked: Tracked = new Tracked();
  readonly #dimensionOf: (state: number) => number;
  /** Nanoseconds by which the ledger has made work dearer since the last base, and the price at which a new one was last refused. */
  #carried = 0;
  readonly #latencyBudget: number | undefined;
  readonly #memoryLimit: number;
  readonly #route: Route;
  #refused = 1;
  /** What a row of the last commit took: the next one's prediction. */
  #flopsPerRow: number | undefined;
  #refusal: string | undefined;
  /** The loss of digits in the ledger at which a new base was last refused: it is asked for again when ten times that is lost. */
  #lossRefused = 0;
  /** A new base being built while the old one answers. */
  #background: Background | undefined;
  /** The bound on blocks from the base alone. */
  #baseBound = Number.EPSILON;

  /** @param latencyBudget milliseconds of a commit beyond which a new base is built in slices; undefined: at once.
   *  @param memoryLimit bytes that the factor of a base may take.  @param route by which bases are factored. */
  constructor(dimensionOf: (state: number) => number, latencyBudget: number | undefined, memoryLimit: number, route: Route) {
    this.#dimensionOf = dimensionOf;
    this.#latencyBudget = latencyBudget;
    this.#memoryLimit = memoryLimit;
    this.#route = route;
  }

  get isEmpty(): boolean {
    return !this.#system;
  }
  get system(): System {
    return this.#system!;
  }
  /** Why the last wish for a new base was not followed, if so. */
  get refusal(): string | undefined {
    return this.#refusal;
  }
  /** A bound on the error of blocks computed now by forward solves, relative to their traces; see `bound.ts`. */
  get baseBound(): number {
    return this.#system ? closedBound(this.#system.bound()) : 0;
  }
  /** The same of kept blocks, as they will be once they have followed: that of what they were computed from, times the ratio of their
   *  largest past trace to the present one, and what the rows that they still owe can add to it. */
  get trackedBound(): number {
    const { system, tracked } = this;
    const growth = tracked.owed(system) > 0 ? system.owedGrowth(tracked.rows) : 1;
    return closedBound(Math.max(tracked.error, system.bound()) * tracked.ratio * growth);
  }
  /** A bound for whatever is read until the next commit, by whichever way: from kept blocks, through the ledger, or from the new base that
   *  `refresh` may take. */
  boundOfReadings(track: boolean, tolerance: number): number {
    if (!this.#system) return 0;
    if (!track) return this.baseBound;
    if (this.system.events.length === 0 && !this.tracked.valid) return this.baseBound;
    if (this.#keepsNumbers() && this.keptAreGood(tolerance)) return Math.max(this.baseBound, this.trackedBound);
    if (!this.tracked.valid) return this.#mostOfNewBase();
    // Kept after all, when they turn out to have lost less than they might: within the tolerance if a fresh block is.
    return Math.max(this.#mostOfNewBase(), this.baseBound > tolerance ? this.trackedBound : Math.min(this.trackedBound, tolerance));
  }

  /** Applies a batch, or throws with everything as it was.
   *  @param measurements how many are in force after it.
   *  @param column the state whose column is kept, −1: none, undefined: nothing is tracked.
   *  @throws {SingularBatch} */
  *apply(batch: Batch, world: () => World, measurements: number, track: boolean, column: number): Steps<Outcome> {
    const { newStates, plus, minus } = batch;
    const begun = this.#latencyBudget === undefined ? 0 : performance.now();
    const rowCount = countRows(plus) + countRows(minus);
    if (!this.#system) return yield* this.#rebase(world(), track, "the first commit", false);
    if (newStates.length > MOST_LEAVES) return yield* this.#rebase(world(), track, `${newStates.length} states at once`, false);
    const touched = new Set(newStates);
    const isNew = ({ rows }: OwnedRows) => rows.states.some((state) => touched.has(state));
    const split = splitLeaves(
      newStates,
      plus.filter(isNew).map(({ rows }) => rows),
      this.#dimensionOf,
    );
    if (!split) return yield* this.#rebase(world(), track, "new states that only the whole determines", false);
    const arriving = [
      ...plus.filter((owned) => !isNew(owned)),
      ...split.rest.map((rows) => plus.find((owned) => owned.rows === rows) ?? { rows, measurement: -1 }),
    ];
    if (rowCount > MOST_ROWS) return yield* this.#rebase(world(), track, `${rowCount} rows at once`, false);

    const before = this.system.events.length;
    const addedBefore = this.system.added;
    const predictedFlops = rowCount * (this.#flopsPerRow ?? 2 * FIRST_PATH_SHARE * this.system.base.costs.nonzeros);
    const flopsBefore = this.system.flops;
    try {
      this.#intoLedger(arriving, minus, split.leaves, track, column);
    } catch (error) {
      if (!(error instanceof SingularBatch) || (this.#route === "information" && this.#hasFreeStates(world()))) throw error;
      return yield* this.#rebase(world(), track, "rounding has eaten what rows taken out of the ledger left", false);
    }
    const countedFlops = this.system.flops - flopsBefore;
    if (rowCount > 0) this.#flopsPerRow = countedFlops / rowCount;
    let outcome = this.#ledgerOutcome(countRows(arriving) + countRows(minus), predictedFlops, countedFlops, split.leaves, track, column);
    const { removedReach, removedGrowth } = this.system.sources();
    const loss = this.#loss();
    if (minus.length > 0 && (1 + removedReach) * removedGrowth > SUSPICIOUS_LOSS) {
      this.tracked.valid = false;
      if (this.#hasFreeStates(world())) {
        this.#putBack(before);
        if (this.#route === "information") throw new SingularBatch(undefined);
        // As far as an information matrix tells; reflected rows tell more.
        return yield* this.#rebase(world(), track, "rows taken out have left hardly anything of what they made certain", false);
      }
    }
    const reasons: string[] = [];
    const strength = this.system.strongest(addedBefore);
    if (track && this.tracked.valid && subtractionSpoils(strength * this.tracked.ratio, this.tracked.error)) {
      // At worst; what it did is known once the kept numbers have taken it in.
      this.tracked.refresh(this.system, column);
      const limit = keptLimit(this.#baseBound);
      if (this.trackedBound > limit) {
        this.tracked.valid = this.#renewSuspects(column, limit);
        reasons.push(`a reading made what it reads ${strength.toExponential(1)} times stronger: kept marginals are computed afresh`);
        outcome = { ...outcome, because: `${outcome.because}; ${reasons[0]}` };
      }
    }
    const isSpoilt = subtractionSpoils(loss, this.#baseBound) && loss > 10 * this.#lossRefused;
    if (isSpoilt) reasons.push(`differences in the ledger have made rounding errors ${loss.toExponential(1)} times larger`);
    const wish = this.#wishForBase(measurements);
    if (wish) reasons.push(wish);
    const reason = isSpoilt || wish ? reasons.join("; ") : undefined;
    if (this.#latencyBudget !== undefined) return this.#inBackground(outcome, reason, world, track, column, begun + this.#latencyBudget);
    return reason ? yield* this.#afterLedger(outcome, reason, world, track, column, before) : outcome;
  }

  /** Leaves, drops and rows; on any failure the system is put back as it was. */
  #intoLedger(plus: readonly OwnedRows[], minus: readonly OwnedRows[], leaves: readonly Leaf[], track: boolean, column: number): void {
    const system = this.system;
    const before = system.events.length;
    const slots = system.slots;
    let touchedTracked = false;
    try {
      for (const leaf of leaves) system.addLeaf(leaf);
      const droppable = minus.length > 0 && plus.length === 0 && minus.every(({ measurement }) => system.canDrop(measurement));
      const signed = minus.length > 0 || system.removed > 0;
      const keepTracked = signed && track && this.tracked.valid;
      if (keepTracked) this.tracked.refresh(system, column);
      if (plus.length + minus.length === 0) return;
      const [p, m] = [countRows(plus), countRows(minus)];
      if (droppable) {
        if (keepTracked) {
          system.loadBatch([], minus);
          system.forward();
          touchedTracked = true;
          if (!this.tracked.applySigned(system, 0, m, () => {})) throw new SingularBatch(undefined);
          system.clear();
        }
        for (const owned of minus) system.drop(owned);
        if (keepTracked) this.tracked.count(system);
        return;
      }
      system.loadBatch(plus, minus);
      system.forward();
      if (keepTracked) {
        touchedTracked = true;
        if (!this.tracked.applySigned(system, p, m, () => system.enter(plus, minus))) throw new SingularBatch(undefined);
      } else system.enter(plus, minus);
      system.clear();
      if (!system.settle(plus, minus)) throw new SingularBatch(undefined);
      if (keepTracked) this.tracked.count(system);
      else if (signed) this.tracked.valid = false;
    } catch (error) {
      system.clear();
      if (system.events.length > before && system.events.slice(before).every((e) => e.kind === "leaf")) system.dropLeaves(slots);
      else if (system.events.length > before) this.#putBack(before);
      if (touchedTracked || this.tracked.slots > slots) this.tracked.valid = false;
      throw error;
    }
  }

  /** Rebuilds the ledger from its first `count` events. */
  #putBack(count: number): void {
    const system = this.system;
    const events = system.events.slice(0, count);
    system.renew();
    this.tracked.valid = false;
    for (const event of events) replay(system, event);
  }

  /** @param rows those that went into the ledger: a leaf's own cost nothing beyond it. */
  #ledgerOutcome(
    rows: number,
    predictedFlops: number,
    countedFlops: number,
    leaves: readonly Leaf[],
    track: boolean,
    column: number,
  ): Outcome {
    const { system } = this;
    const isFresh = track && column >= 0 && leaves.length > 0 && !(leaves.length === 1 && this.tracked.follows(leaves[0]!));
    const columns = rows + (isFresh ? this.#dimensionOf(column) : 0);
    this.#carried += carryingCost(columns, system.entries, system.leafNumbers, system.added + system.removed);
    const because = leaves.length > 0 ? "new states as leaves, rows between older ones in the ledger" : "rows in the ledger";
    return { route: "ledger", because, predictedFlops, countedFlops };
  }

  /** Why a new base is due, if it is. Each refusal doubles what has to speak for the next one. */
  #wishForBase(measurements: number): string | undefined {
    const { base, slots, bytes } = this.system;
    const reason = rebasePays(
      this.#carried,
      rebaseCost(base.costs, slots, measurements) * this.#refused,
      bytes / this.#refused,
      base.costs,
    );
    return reason && (reason === "cost" ? "carrying on has cost as much as a new base" : "the ledger has outgrown its share of memory");
  }

  /** A new base after the ledger has taken the batch in. One that cannot be had is no failure; an abort takes the batch out again. */
  *#afterLedger(ledger: Outcome, because: string, world: () => World, track: boolean, column: number, before: number): Steps<Outcome> {
    let outcome: Outcome | undefined;
    try {
      outcome = yield* this.#rebase(world(), track, because, true, column);
    } catch (error) {
      if (error instanceof SingularBatch) this.#refuse("a new base would not be definite in f64, while leaves and ledger still are");
      else if (error instanceof MemoryLimitError) this.#refuse(`a new base does not fit into memory: ${error.message}`);
      else throw error;
      outcome = ledger;
    } finally {
      if (!outcome) this.#putBack(before);
    }
    return outcome;
  }

  /** Spends what the deadline leaves on a new base. The old one goes on until the new one has caught up with it. */
  #inBackground(
    ledger: Outcome,
    reason: string | undefined,
    world: () => World,
    track: boolean,
    column: number,
    deadline: number,
  ): Outcome {
    const { system } = this;
    if (!this.#background) {
      if (!reason) return ledger;
      const all = world();
      const sizes = Int32Array.from(all.states, (state) => this.#dimensionOf(state));
      const steps = this.#baseOf(all, sizes);
      const first = steps.next(status.ok);
      this.#background = {
        steps,
        call: first.done ? undefined : first.value,
        world: all,
        sizes,
        replayed: system.events.length,
        next: undefined,
      };
    }
    const job = this.#background;
    while (performance.now() < deadline) {
      if (job.call) {
        const result = job.call.advance(BACKGROUND_SLICE);
        if (result === status.running) continue;
        const step = job.steps.next(result);
        job.call = step.done ? undefined : step.value;
        if (!step.done) continue;
        if (isSingular(step.value)) {
          this.#dropBackground();
          this.#refuse("a new base would not be definite in f64, while leaves and ledger still are");
          return ledger;
        }
        job.next = new System(step.value, job.world, job.sizes);
      } else if (job.replayed < system.events.length) {
        replay(job.next!, system.events[job.replayed]!);
        job.replayed += 1;
      } else {
        const next = job.next!;
        this.#background = undefined;
        return this.#adopt(next, track, `${reason ?? "a new base was due"}; built in slices`, true, column);
      }
    }
    return { ...ledger, because: `${ledger.because}; a new base is being built` };
  }

  #dropBackground(): void {
    this.#background?.steps.return(undefined as never);
    this.#background?.next?.free();
    this.#background = undefined;
  }

  /** By what factor leaves and ledger have made the bound larger than that of the base alone. */
  #loss(): number {
    return this.system.bound() / this.#baseBound;
  }

  #refuse(why: string): void {
    this.#refusal = why;
    this.#lossRefused = this.#loss();
    this.#refused *= 2;
    this.#carried = 0;
  }

  /** Builds a base of everything. `carry`: the system holds the same information already, so tracked numbers move over.
   *  @throws {SingularBatch} nothing is changed then. */
  *#rebase(world: World, track: boolean, because: string, carry: boolean, column = -1): Steps<Outcome> {
    const sizes = Int32Array.from(world.states, (state) => this.#dimensionOf(state));
    const base = yield* this.#baseOf(world, sizes);
    if (isSingular(base)) throw new SingularBatch(base);
    // Reflected rows have had their rank looked at, by what is left of the rows themselves.
    if (base.route === "information" && base.condition > SUSPICIOUS_CONDITION && this.#hasFreeStates(world)) {
      base.free();
      throw new SingularBatch(undefined);
    }
    this.#dropBackground();
    return this.#adopt(new System(base, world, sizes), track, because, carry, column);
  }

  /** Whether some state moves that the rows do not hold at all: rounding has let a pivot through that ought to be zero. */
  #hasFreeStates({ states, rows }: World): boolean {
    const found = findUndetermined(
      states.map((id) => ({ id, dimension: this.#dimensionOf(id) })),
      rows,
    );
    return found !== undefined && !found.isWeak;
  }

  /** Puts a new system in the place of the old one, unless it would be the worse of the two. */
  #adopt(next: System, track: boolean, because: string, carry: boolean, column: number): Outcome {
    const { base } = next;
    const bound = boundOfBase(base.condition, base.factorCondition);
    const old = this.#system;
    if (old && carry && bound > this.#mostOfNewBase() && old.slots > 0) {
      next.free();
      this.#refuse(`a new base would be good to ${bound.toExponential(1)} only, the present one to ${this.baseBound.toExponential(1)}`);
      return { route: "ledger", because: `rows in the ledger; ${this.#refusal}`, predictedFlops: 0, countedFlops: 0 };
    }
    if (old) {
      if (carry && track && this.tracked.valid && this.#catchUpIsCheaper(old, base)) {
        this.tracked.refresh(old, column);
        this.tracked.carryOver(old, next);
      } else this.tracked.valid = false;
      old.free();
    }
    this.#system = next;
    this.#baseBound = bound;
    this.#carried = 0;
    this.#refused = 1;
    this.#lossRefused = 0;
    this.#refusal = undefined;
    const { eliminationFlops } = base.costs;
    return { route: "rebase", because: `${because}; ${base.because}`, predictedFlops: eliminationFlops, countedFlops: eliminationFlops };
  }

  /** The bound that a new base may have beside the one there is. */
  #mostOfNewBase(): number {
    return Math.max(HARMLESS, 2 * this.baseBound);
  }

  /** A base of everything in `world`, in steps. */
  *#baseOf(world: World, sizes: Int32Array): Steps<Base | Singular> {
    const place = new IntList((world.states.at(-1) ?? 0) + 1);
    world.states.forEach((state, k) => {
      place.set(state, k, -1);
    });
    const information = yield* part(
      assemblySteps(sizes, (state) => place.at(state), world.rows, this.#route !== "information"),
      0,
      ASSEMBLY_SHARE,
    );
    try {
      const options = { queries: QUERIES, memoryLimit: this.#memoryLimit, route: this.#route };
      return yield* part(baseSteps(information, options), ASSEMBLY_SHARE, 1);
    } finally {
      information.giveBack();
    }
  }

  #catchUpIsCheaper(system: System, base: Base): boolean {
    return backwardCost(this.tracked.owed(system) + 3, base.costs.nonzeros) < blocksCost(base.costs);
  }

  /** Brings tracked numbers up to date by the cheaper exact route.
   *  @throws {SingularBatch} cannot happen for a committed system unless rounding has eaten it. */
  refresh(world: () => World, column: number, tolerance: number): void {
    const system = this.system;
    const isCurrent = this.tracked.isCurrent(system, column);
    if (isCurrent || this.#keepsNumbers()) {
      if (!isCurrent) this.tracked.refresh(system, column);
      if (this.keptAreGood(tolerance) || this.#renewSuspects(column, Math.min(tolerance, keptLimit(this.baseBound)))) return;
    }
    // Where no new base is taken, the old one is the more exact one or the only one to be had: blocks from it, one by one.
    const isBare = system.events.length === 0 || this.#renewedForReading(world);
    if (isBare && !this.system.base.costs.blocksBySolves) this.tracked.recompute(this.system);
    else this.tracked.fromLedger(this.system);
    this.tracked.refresh(this.system, column);
  }

  /** Whether kept numbers catch up rather than being computed afresh. */
  #keepsNumbers(): boolean {
    const { system, tracked } = this;
    const { costs } = system.base;
    const catchUp = backwardCost(tracked.owed(system) + 3, costs.nonzeros);
    const afresh = blocksCost(costs) + (system.events.length > 0 ? rebaseCost(costs, system.slots, system.slots) : 0);
    return tracked.valid && catchUp <= afresh;
  }

  /** Whether kept numbers are as good as they have to be, or nothing would be gained. */
  keptAreGood(tolerance: number): boolean {
    return this.trackedBound <= Math.min(tolerance, keptLimit(this.baseBound)) || this.baseBound > tolerance;
  }

  /** Computes kept blocks afresh whose bound passes `limit`, one by one, where that is cheaper than all of them, and then the column. */
  #renewSuspects(column: number, limit: number): boolean {
    const { system, tracked } = this;
    const { costs } = system.base;
    // With room to spare: bounds grow a little with every leaf.
    const ratio = limit / (4 * Math.max(tracked.error, system.bound()));
    if (!(ratio > 2)) return false;
    const path = pathCost(this.#flopsPerRow ?? 2 * FIRST_PATH_SHARE * costs.nonzeros);
    const most = Math.floor((blocksCost(costs) + rebaseCost(costs, system.slots, system.slots)) / path);
    if (!tracked.renewSuspects(system, ratio, most)) return false;
    tracked.refresh(system, column);
    return this.trackedBound <= limit;
  }

  /** What `restore` needs, without copies of rows; undefined before the first commit. */
  save(): SavedEngine | undefined {
    const system = this.#system;
    if (!system) return undefined;
    return {
      world: system.world,
      events: system.events,
      carried: this.#carried,
      refused: this.#refused,
      lossRefused: this.#lossRefused,
      refusal: this.#refusal,
      flopsPerRow: this.#flopsPerRow,
      tracked: this.tracked.save(),
    };
  }

  /** Brings an empty engine to where another one was saved: its base is factored again, and what happened since is replayed in order.
   *  @throws {SingularBatch} the numbers of this kernel build do not bear it. After any failure: `free`. */
  restore({ world, events, carried, refused, lossRefused, refusal, flopsPerRow, tracked }: SavedEngine): void {
    const sizes = Int32Array.from(world.states, (state) => this.#dimensionOf(state));
    const base = runSteps(this.#baseOf(world, sizes));
    if (isSingular(base)) throw new SingularBatch(base);
    const system = new System(base, world, sizes);
    this.#system = system;
    for (const event of events) replay(system, event);
    this.tracked.restore(system, tracked);
    this.#baseBound = boundOfBase(base.condition, base.factorCondition);
    this.#carried = carried;
    this.#refused = refused;
    this.#lossRefused = lossRefused;
    this.#refusal = refusal;
    this.#flopsPerRow = flopsPerRow;
  }

  /** Takes a new base of everything, so that blocks can be read off it; false when the old one stays. */
  #renewedForReading(world: () => World): boolean {
    try {
      return runSteps(this.#rebase(world(), false, "marginals afresh", true)).route === "rebase";
    } catch (error) {
      if (!(error instanceof SingularBatch)) throw error;
      this.#refuse("a new base would not be definite in f64, while leaves and ledger still are");
      return false;
    }
  }

  free(): void {
    this.#dropBackground();
    this.tracked.free();
    this.#system?.free();
    this.#system = undefined;
  }
}

/** Does to a system what an event did to another one. A drop of rows that its base holds becomes their removal. */
function replay(system: System, event: SystemEvent): void {
  if (event.kind === "leaf") {
    system.addLeaf(event.leaf);
    return;
  }
  if (event.kind === "drop" && system.canDrop(event.owned.measurement)) {
    system.drop(event.owned);
    return;
  }
  const plus = event.kind === "rows" ? event.plus : [];
  const minus = event.kind === "rows" ? event.minus : [event.owned];
  system.loadBatch(plus, minus);
  system.forward();
  system.enter(plus, minus);
  system.clear();
  if (!system.settle(plus, minus)) throw new SingularBatch(undefined);
}
