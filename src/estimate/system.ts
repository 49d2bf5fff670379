// Base, leaves and ledger as the estimate uses them: states by slot, rows loaded, carried forward, kept, dropped.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyFloats, writeFloats } from "../../bindings/memory.js";
import { IntList } from "../support/int-list.js";
import type { Base } from "./base.js";
import { type ErrorSources, firstOrderBound } from "./bound.js";
import type { Leaf } from "./leaf.js";
import { LeafCondition } from "./leaf-condition.js";
import type { WhitenedRows } from "./whitened.js";

/** All that is in force after a commit: what a base is built from. */
export interface World {
  readonly states: readonly number[];
  readonly rows: readonly WhitenedRows[];
}

/** What has happened to a base since it was built, in order; replayed on the next base, and kept in snapshots. */
export type SystemEvent =
  | { readonly kind: "leaf"; readonly leaf: Leaf }
  | { readonly kind: "rows"; readonly plus: readonly OwnedRows[]; readonly minus: readonly OwnedRows[] }
  | { readonly kind: "drop"; readonly owned: OwnedRows };

/** Rows with the measurement they are all of, or −1 when a rotation has mixed several. */
export interface OwnedRows {
  readonly rows: WhitenedRows;
  readonly measurement: number;
}

export const countRows = (list: readonly OwnedRows[]): number => list.reduce((sum, { rows }) => sum + rows.rows, 0);

export class System {
  readonly #k = kernel();
  readonly base: Base;
  /** What the base was built from. */
  readonly world: World;
  /** Slot of each state, by state id; −1: none. */
  readonly #slotOf: IntList;
  readonly #stateOf: IntList;
  /** First position of each slot, one more at the end. */
  readonly #position: IntList;
  readonly events: SystemEvent[] = [];
  /** Measurement of each added row in the ledger. */
  readonly #owner: number[] = [];
  #scratch = 0;
  #scratchBytes = 0;
  leafNumbers = 0;
  #newestLeaf: Leaf | undefined;
  readonly #leafCondition = new LeafCondition();
  /** By slot, of states of the base that leaves hang on. */
  readonly #parentCovariance = new Map<number, Float64Array>();
  /** Undefined when leaves or rows have changed since. */
  #sources: ErrorSources | undefined;

  /** @param world its states as they are numbered in the base's information matrix. @param sizes their dimensions. */
  constructor(base: Base, world: World, sizes: Int32Array) {
    this.base = base;
    this.world = world;
    const slots = base.stateOfSlot.length;
    this.#slotOf = new IntList((world.states.at(-1) ?? 0) + 65);
    this.#stateOf = new IntList(slots + 64);
    this.#position = new IntList(slots + 65);
    this.#position.push(0);
    for (const place of base.stateOfSlot) this.#push(world.states[place]!, sizes[place]!);
  }

  #push(state: number, dimension: number): void {
    this.#slotOf.set(state, this.#stateOf.length, -1);
    this.#stateOf.push(state);
    this.#position.push(this.positions + dimension);
  }

  #pop(): void {
    this.#stateOf.length -= 1;
    this.#position.length -= 1;
    this.#slotOf.set(this.#stateOf.at(this.#stateOf.length), -1, -1);
  }

  /** Slots from `from` on in the order in which their states arrived. */
  arrivals(from: number): number[] {
    const slots: number[] = [];
    if (from > 0) {
      for (let slot = from; slot < this.slots; slot += 1) slots.push(slot);
      return slots.sort((a, b) => this.stateAt(a) - this.stateAt(b));
    }
    for (let state = 0; state < this.#slotOf.length; state += 1) if (this.#slotOf.at(state) >= 0) slots.push(this.#slotOf.at(state));
    return slots;
  }

  get slots(): number {
    return this.#stateOf.length;
  }
  get positions(): number {
    return this.#position.at(this.#position.length - 1);
  }
  get added(): number {
    return this.#k.ledgerAdded(this.base.ledger);
  }
  get removed(): number {
    return this.#k.ledgerRemoved(this.base.ledger);
  }
  /** Numbers in the ledger's columns. */
  get entries(): number {
    return this.#k.ledgerEntries(this.base.ledger);
  }
  get bytes(): number {
    return this.#k.ledgerBytes(this.base.ledger);
  }
  /** Flops of the ledger's work so far. */
  get flops(): number {
    return this.#k.ledgerFlops(this.base.ledger);
  }
  /** The leaf that was added last, if any has come since the base. */
  get newestLeaf(): Leaf | undefined {
    return this.#newestLeaf;
  }
  slotOf(state: number): number {
    return this.#slotOf.at(state);
  }
  stateAt(slot: number): number {
    return this.#stateOf.at(slot);
  }
  positionOf(slot: number): number {
    return this.#position.at(slot);
  }
  dimensionAt(slot: number): number {
    return this.#position.at(slot + 1) - this.#position.at(slot);
  }

  /** Kernel memory for arguments of the next call, at least `bytes` long; its contents are not kept. */
  scratch(bytes: number): number {
    if (bytes > this.#scratchBytes) {
      const wanted = 2 * bytes + 256;
      const address = addressOrThrow("The estimate's work space", this.#k.allocate(wanted), wanted);
      this.#k.release(this.#scratch);
      this.#scratch = address;
      this.#scratchBytes = wanted;
    }
    return this.#scratch;
  }

  #require(result: number, what: string, bytes: number): void {
    if (result === status.outOfMemory) throw new MemoryLimitError(what, bytes, bytesAvailable());
  }

  /** @throws {MemoryLimitError} nothing is changed then. */
  addLeaf(leaf: Leaf): void {
    const { dimension, parents, numbers, z } = leaf;
    const inBase = this.base.stateOfSlot.length;
    const covariances = parents.map((parent) => {
      const slot = this.#slotOf.at(parent);
      return slot < inBase ? this.#covarianceInBase(slot) : slot - inBase;
    });
    const address = this.scratch(8 * (numbers.length + z.length + parents.length));
    const parentsAt = address + 8 * (numbers.length + z.length);
    writeFloats(address, numbers);
    writeFloats(address + 8 * numbers.length, z);
    new Int32Array(this.#k.memory.buffer, parentsAt, parents.length).set(parents.map((p) => this.#slotOf.at(p)));
    this.#require(
      this.#k.addLeaf(this.base.ledger, dimension, parents.length, parentsAt, address, address + 8 * numbers.length),
      "A new state",
      8 * numbers.length,
    );
    this.#push(leaf.state, dimension);
    this.leafNumbers += numbers.length;
    this.#leafCondition.add(leaf, covariances);
    this.#sources = undefined;
    this.events.push({ kind: "leaf", leaf });
    this.#newestLeaf = leaf;
  }

  /** Takes the newest leaves away again; they must have no row in the ledger. */
  dropLeaves(slots: number): void {
    while (this.slots > slots) {
      this.#pop();
      const event = this.events.pop();
      if (event?.kind === "leaf") this.leafNumbers -= event.leaf.numbers.length;
    }
    this.#newestLeaf = undefined;
    this.#k.dropLeaves(this.base.ledger, slots);
    this.#leafCondition.keep(slots - this.base.stateOfSlot.length);
    this.#sources = undefined;
  }

  /** The covariance of a state of the base under the base alone, for its leaves: one path, once. */
  #covarianceInBase(slot: number): Float64Array {
    const known = this.#parentCovariance.get(slot);
    if (known) return known;
    const d = this.dimensionAt(slot);
    this.begin(d);
    this.loadUnits(0, slot);
    this.forward();
    const covariance = copyFloats(this.#k.ledgerOwnGram(this.base.ledger) >>> 0, d * d);
    this.clear();
    this.#parentCovariance.set(slot, covariance);
    return covariance;
  }

  begin(columns: number): void {
    this.#require(this.#k.beginColumns(this.base.ledger, columns), "The columns asked for", 8 * columns * this.positions);
  }

  loadRows(from: number, { states, rows, blocks }: WhitenedRows): void {
    for (const [k, state] of states.entries()) {
      const block = blocks[k]!;
      const address = this.scratch(8 * block.length);
      writeFloats(address, block);
      this.#k.loadBlock(this.base.ledger, from, rows, this.#slotOf.at(state), address);
    }
  }

  loadUnits(from: number, slot: number): void {
    this.#k.loadUnits(this.base.ledger, from, slot);
  }

  forward(): void {
    this.#k.carryForward(this.base.ledger);
  }
  back(): void {
    this.#k.carryBack(this.base.ledger);
  }
  backTo(slots: readonly number[]): void {
    const address = this.scratch(4 * slots.length);
    new Int32Array(this.#k.memory.buffer, address, slots.length).set(slots);
    this.#k.carryBackTo(this.base.ledger, address, slots.length);
  }
  clear(): void {
    this.#k.clearColumns(this.base.ledger);
  }

  /** A Σ Aᵀ of the loaded columns, columns², after `forward`. */
  gram(columns: number): Float64Array {
    return copyFloats(this.#k.ledgerGram(this.base.ledger) >>> 0, columns * columns);
  }
  /** A x of the loaded columns, after `forward`. */
  values(columns: number): Float64Array {
    const address = this.scratch(8 * columns);
    this.#k.columnValues(this.base.ledger, address);
    return copyFloats(address, columns);
  }
  /** Σ Aᵀ at one slot, columns × dimension: `columns` numbers for each unknown, after `back` or `backTo`. */
  columnsAt(slot: number, columns: number): Float64Array {
    return this.#columnsFrom(this.#position.at(slot), this.dimensionAt(slot), columns);
  }

  /** Σ Aᵀ at all positions, `columns` numbers for each, after `back`. */
  columns(columns: number): Float64Array {
    return this.#columnsFrom(0, this.positions, columns);
  }

  #columnsFrom(position: number, count: number, columns: number): Float64Array {
    // In the kernel, several columns lie side by side in whole pairs.
    const side = columns === 1 ? 1 : (columns + 1) & ~1;
    const x = new Float64Array(this.#k.memory.buffer, (this.#k.ledgerX(this.base.ledger) >>> 0) + 8 * side * position, side * count);
    const copy = new Float64Array(columns * count);
    for (let p = 0, to = 0; p < count; p += 1) for (let c = 0; c < columns; c += 1, to += 1) copy[to] = x[p * side + c]!;
    return copy;
  }

  /** The estimate at all positions. Cost: one backward solve. */
  estimate(): Float64Array {
    this.#require(this.#k.solveEstimate(this.base.ledger), "The solution", 8 * this.positions);
    const x = copyFloats(this.#k.ledgerX(this.base.ledger) >>> 0, this.positions);
    this.clear();
    return x;
  }

  /** Loads rows, signs +1 first, and carries them forward. Returns how many columns; `extra` more are left free at the end. */
  loadBatch(plus: readonly OwnedRows[], minus: readonly OwnedRows[], extra = 0): number {
    const count = countRows(plus) + countRows(minus);
    this.begin(count + extra);
    let from = 0;
    for (const { rows } of [...plus, ...minus]) {
      this.loadRows(from, rows);
      from += rows.rows;
    }
    return count;
  }

  /** Enters the loaded, carried rows without letting them count. @throws {MemoryLimitError} nothing is changed then. */
  enter(plus: readonly OwnedRows[], minus: readonly OwnedRows[]): void {
    const [p, m] = [countRows(plus), countRows(minus)];
    const address = this.scratch(8 * (p + m));
    let at = address;
    for (const { rows } of [...plus, ...minus]) {
      writeFloats(at, rows.residual);
      at += 8 * rows.rows;
    }
    this.#require(this.#k.enterRows(this.base.ledger, p, m, address), "The ledger", 8 * (p + m) * this.positions);
  }

  /** Lets entered rows count. False when the removed ones leave a state undetermined; they are out again then. */
  settle(plus: readonly OwnedRows[], minus: readonly OwnedRows[]): boolean {
    const [p, m] = [countRows(plus), countRows(minus)];
    if (this.#k.settleRows(this.base.ledger, p, m) !== status.ok) return false;
    for (const { rows, measurement } of plus) for (let q = 0; q < rows.rows; q += 1) this.#owner.push(measurement);
    this.events.push({ kind: "rows", plus, minus });
    this.#sources = undefined;
    return true;
  }

  /** Whether all `rows` rows of a measurement are in the ledger as they came, so that they can simply be dropped. */
  canDrop(measurement: number): boolean {
    return this.removed === 0 && this.#owner.includes(measurement);
  }

  drop(owned: OwnedRows): void {
    const { measurement } = owned;
    for (let id = this.#owner.lastIndexOf(measurement); id >= 0; id = this.#owner.lastIndexOf(measurement)) {
      this.#k.dropRow(this.base.ledger, id);
      this.#owner.splice(id, 1);
    }
    this.events.push({ kind: "drop", owned });
    this.#sources = undefined;
  }

  /** How many times stronger the strongest added row from `since` on made what it reads. */
  strongest(since: number): number {
    return this.#k.strongestRow(this.base.ledger, since);
  }

  /** What rounding errors of blocks computed now are made of. Cost: the ledger's rows; after a removal, its removed rows cubed ÷ 6, once. */
  sources(): ErrorSources {
    const { ledger, condition, factorCondition } = this.base;
    this.#sources ??= {
      baseCondition: condition,
      factorCondition,
      leafCondition: this.#leafCondition.value,
      addedGrowth: this.#k.addedGrowth(ledger),
      removedReach: this.#k.removedReach(ledger),
      removedGrowth: this.#k.removedGrowth(ledger),
    };
    return this.#sources;
  }

  /** A bound on the relative error of blocks computed now, to first order; see `bound.ts`. */
  bound(): number {
    return firstOrderBound(this.sources());
  }

  /** By what factor, at most, added rows from `since` on have made anything smaller. While nothing is removed. */
  owedGrowth(since: number): number {
    return this.#k.owedGrowth(this.base.ledger, since);
  }

  logDeterminant(): number {
    return this.#k.ledgerLogDeterminant(this.base.ledger);
  }

  /** Back to the base alone: no leaf, no row, no event. */
  renew(): void {
    this.#k.ledgerRenew(this.base.ledger);
    const slots = this.base.stateOfSlot.length;
    while (this.slots > slots) this.#pop();
    this.#owner.length = 0;
    this.events.length = 0;
    this.leafNumbers = 0;
    this.#leafCondition.keep(0);
    this.#sources = undefined;
    this.#newestLeaf = undefined;
  }

  free(): void {
    this.#k.release(this.#scratch);
    this.#scratch = 0;
    this.#scratchBytes = 0;
    this.base.free();
  }
}
