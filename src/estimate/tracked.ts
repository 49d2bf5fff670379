// Marginals kept current: all diagonal blocks of Σ, and one block column of it, in the order in which the states arrived. Brought up to date
// when they are read, by what the rows since have changed; or computed afresh when that is cheaper or more exact.
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, copyFloats, copyInts, writeFloats } from "../../bindings/memory.js";
import type { Leaf } from "./leaf.js";
import { eachMarginal } from "./marginals.js";
import type { System } from "./system.js";

/** Unit columns carried forward together for blocks of new states: their product is square in this. */
const UNIT_COLUMNS = 24;
/** Most unknowns of a state: so many columns may have to be held. */
const WIDEST = 16;

/** Kernel memory that grows; its contents move along. */
class Room {
  readonly #k = kernel();
  #bytes = 0;
  address = 0;
  /** Room for `bytes`, keeping the first `used`. */
  reserve(bytes: number, used: number): void {
    if (bytes <= this.#bytes) return;
    const wanted = Math.ceil(1.5 * bytes) + 256;
    const address = addressOrThrow("The tracked marginals", this.#k.allocate(wanted), wanted);
    if (used > 0) new Uint8Array(this.#k.memory.buffer).copyWithin(address, this.address, this.address + used);
    this.#k.release(this.address);
    this.address = address;
    this.#bytes = wanted;
  }
  free(): void {
    this.#k.release(this.address);
    this.address = 0;
    this.#bytes = 0;
  }
}

/** Kept numbers lose as many digits as a removal makes states weaker: six here, which leaves ten. */
const WEAKENED = 1e6;

/** Kept numbers as they were saved, in order of arrival. */
export interface SavedTracked {
  readonly ratio: number;
  readonly error: number;
  /** Undefined when they have to be computed afresh. */
  readonly numbers:
    | {
        readonly slots: number;
        readonly rows: number;
        readonly columnState: number;
        readonly blocks: Float64Array;
        readonly largest: Float64Array;
        /** By columns, as many as the column's state has unknowns. */
        readonly column: Float64Array;
      }
    | undefined;
}

/** Kept numbers as they lie in kernel memory. */
export interface KeptView {
  /** Blocks, d × d each. */
  readonly blocks: Float64Array;
  /** The block column by columns, `across` of them, `lead` apart. */
  readonly column: Float64Array;
  readonly lead: number;
  readonly across: number;
  /** For each slot two numbers: where its block begins in `blocks`, and its first row in `column`. */
  readonly places: Int32Array;
}

export class Tracked {
  readonly #k = kernel();
  /** For each slot two i32: first f64 of its block, first row of the column. And the slots in order of arrival. */
  readonly #places = new Room();
  readonly #arrivals = new Room();
  /** Blocks, d × d each; largest past traces. */
  readonly #blocks = new Room();
  readonly #largest = new Room();
  /** The block column by columns, `lead` apart. */
  readonly #column = new Room();
  #lead = 0;
  /** Slots, f64 of all blocks and unknowns that the places cover. */
  #slots = 0;
  #size = 0;
  #order = 0;
  /** Added rows that the numbers include. */
  #rows = 0;
  /** The state whose column is kept, −1: none at present, and its dimension. */
  #columnState = -1;
  #across = 0;
  /** False: nothing here is meaningful until it is computed afresh. */
  valid = false;
  /** Largest ratio of a block's past trace to its trace now: what subtraction may have cost in digits. */
  ratio = 1;
  /** The largest bound under which any part of the numbers was computed, relative to the largest trace that a block has had since. */
  error = 0;

  /** Whether the numbers include all rows and slots. */
  isCurrent(system: System, column: number): boolean {
    return this.valid && this.#rows === system.added && this.#slots === system.slots && this.#columnState === column;
  }
  get slots(): number {
    return this.#slots;
  }
  /** Added rows that the numbers include. */
  get rows(): number {
    return this.#rows;
  }
  /** Rows that came since. */
  owed(system: System): number {
    return system.added - this.#rows;
  }

  /** Forgets all places and gives each slot of a system its own. */
  #placeAnew(system: System, slots = system.slots): void {
    this.#slots = 0;
    this.#size = 0;
    this.#order = 0;
    this.#place(system, slots);
  }

  /** Gives slots up to `slots` their places, in the order in which their states arrived. */
  #place(system: System, slots = system.slots): void {
    const before = this.#slots;
    if (slots <= before) return;
    this.#places.reserve(8 * slots, 8 * before);
    this.#arrivals.reserve(4 * slots, 4 * before);
    this.#largest.reserve(8 * slots, 8 * before);
    const arrivals = system.arrivals(before).filter((slot) => slot < slots);
    const places = new Int32Array(this.#k.memory.buffer, this.#places.address, 2 * slots);
    new Int32Array(this.#k.memory.buffer, this.#arrivals.address + 4 * before, slots - before).set(arrivals);
    const used = this.#size;
    for (const slot of arrivals) {
      const d = system.dimensionAt(slot);
      places[2 * slot] = this.#size;
      places[2 * slot + 1] = this.#order;
      this.#size += d * d;
      this.#order += d;
    }
    this.#slots = slots;
    this.#blocks.reserve(8 * this.#size, 8 * used);
    new Float64Array(this.#k.memory.buffer, this.#largest.address + 8 * before, slots - before).fill(0);
  }

  /** Room for `across` columns of all unknowns; what the kept column holds moves along. */
  #reserveColumn(across: number): void {
    const columns = Math.max(across, this.#across);
    if (this.#order <= this.#lead) {
      this.#column.reserve(8 * this.#lead * columns, 8 * this.#lead * this.#across);
      return;
    }
    const [old, lead] = [this.#lead, Math.ceil(1.5 * this.#order) + 64];
    this.#column.reserve(8 * lead * Math.min(WIDEST, columns), 8 * old * this.#across);
    const bytes = new Uint8Array(this.#k.memory.buffer, this.#column.address);
    for (let c = this.#across - 1; c > 0; c -= 1) bytes.copyWithin(8 * c * lead, 8 * c * old, 8 * (c + 1) * old);
    this.#lead = lead;
  }

  /** Computes all blocks afresh from the selected inverse of a base without leaves and rows. */
  recompute(system: System): void {
    const k = this.#k;
    const { factor, ledger } = system.base;
    this.#begin(system);
    const inverse = addressOrThrow("The selected inverse", k.inverseBegin(factor, 1), k.inverseBytes(system.base.symbolic, 1));
    while (k.inverseAdvance(inverse, 1e18) === status.running);
    k.blocksOfInverse(ledger, inverse, this.#places.address, this.#blocks.address);
    k.inverseRelease(inverse);
    this.#rows = 0;
    this.#end(system);
  }

  /** Computes all blocks afresh by forward solves through base, leaves and ledger: where no better base can be had. */
  fromLedger(system: System): void {
    this.#begin(system);
    this.#blocksOfLeaves(system, 0);
    this.#rows = system.added;
    this.#end(system);
  }

  #begin(system: System): void {
    this.valid = false;
    this.#columnState = -1;
    this.#across = 0;
    this.#placeAnew(system);
  }

  #end(system: System): void {
    this.#k.forgetPast(system.base.ledger, this.#arrivals.address, this.#blocks.address, this.#largest.address);
    this.ratio = 1;
    this.error = system.bound();
    this.valid = true;
  }

  /** Brings blocks and the column of `column` (−1: none) up to date. Requires that nothing is removed in the ledger beyond what the
   *  numbers include. */
  refresh(system: System, column: number): void {
    if (this.isCurrent(system, column)) return;
    const k = this.#k;
    const { ledger } = system.base;
    const since = this.#rows;
    const rows = system.removed === 0 ? system.added - since : 0;
    const wasSlots = this.#slots;
    const wasOrder = this.#order;
    this.#place(system);
    const target = column < 0 ? -1 : system.slotOf(column);
    this.error = Math.max(this.error, system.bound());
    const counted = k.countAdded(ledger, since + (system.added - since - rows));
    try {
      // New states first, as they stood before the rows that came since.
      const across = target < 0 ? 0 : system.dimensionAt(target);
      if (target >= 0) this.#reserveColumn(across);
      const followed = this.#followLeaf(system, wasSlots, wasOrder, target);
      const fresh = target >= 0 && !followed && this.#columnState !== column;
      // Fresh columns of the only new state bring its block along.
      const alone = fresh && target === wasSlots && system.slots === wasSlots + 1;
      if (!followed && !alone) this.#blocksOfLeaves(system, wasSlots);
      if (!fresh && target >= 0 && !followed) this.#extendColumn(system, wasSlots);
      const loaded = fresh ? rows + across : rows;
      if (loaded > 0) {
        system.begin(loaded);
        if (fresh) {
          system.loadUnits(rows, target);
          system.forward();
          if (alone) this.#takeBlock(system, target, system.gram(loaded), loaded, rows);
        }
        if (rows > 0) {
          k.loadKept(ledger, since, rows);
          k.scaleColumns(ledger, rows);
        }
        system.back();
        if (rows > 0) this.#update(system, rows, 0, fresh ? rows : -1, target);
        else k.takeColumn(ledger, 0, target, this.#arrivals.address, this.#column.address, this.#lead);
        system.clear();
      }
      this.#columnState = column;
      this.#across = across;
      this.#rows = counted;
    } finally {
      k.countAdded(ledger, counted);
    }
  }

  /** Blocks and column after `plus` and `minus` rows that are loaded, carried forward, scaled and carried back; fresh: where the columns
   *  of the target's units stand among them, −1: nowhere. */
  #update(system: System, plus: number, minus: number, fresh: number, target: number): void {
    this.ratio = this.#k.updateKept(
      system.base.ledger,
      plus,
      minus,
      fresh,
      target,
      this.#arrivals.address,
      this.#blocks.address,
      this.#largest.address,
      this.#column.address,
      this.#lead,
    );
  }

  /** A batch with removed rows, at once: the numbers must be current. Between `forward` and `settle`. False: a removed row fails. When
   *  the removed rows held nearly all, the numbers are given up for fresh ones. */
  applySigned(system: System, plus: number, minus: number, enter: () => void): boolean {
    const k = this.#k;
    const { ledger } = system.base;
    if (k.factorInnovation(ledger, plus, minus) !== status.ok) return false;
    const growth = k.innovationGrowth(ledger, plus, minus);
    this.error = Math.max(this.error, growth * system.bound());
    enter();
    if (growth > WEAKENED) {
      this.valid = false;
      return true;
    }
    k.scaleColumns(ledger, plus + minus);
    system.back();
    this.#update(system, plus, minus, -1, this.#columnState < 0 ? -1 : system.slotOf(this.#columnState));
    return true;
  }

  /** After settling a signed batch, or dropping rows. */
  count(system: System): void {
    this.#rows = system.added;
    this.error = Math.max(this.error, system.bound());
  }

  /** Whether the kept column goes over to a new state without a solve. */
  follows({ parents }: Leaf): boolean {
    return this.#columnState >= 0 && parents.length === 1 && parents[0] === this.#columnState;
  }

  /** One new leaf whose only parent is the state of the kept column: its block and column follow from the parent's. */
  #followLeaf(system: System, slot: number, order: number, target: number): boolean {
    const leaf = system.newestLeaf;
    if (slot + 1 !== system.slots || target !== slot || !leaf || !this.follows(leaf)) return false;
    const d = system.dimensionAt(slot);
    const scratch = system.scratch(8 * (3 * d * d + (d + 2) * this.#across + 16));
    this.#k.followLeaf(
      system.base.ledger,
      slot,
      this.#places.address,
      this.#blocks.address,
      this.#column.address,
      this.#lead,
      order,
      scratch,
    );
    return true;
  }

  /** Blocks of new leaves by forward solves alone. */
  #blocksOfLeaves(system: System, from: number): void {
    for (let slot = from; slot < system.slots; ) {
      const firsts: number[] = [];
      let columns = 0;
      let end = slot;
      while (end < system.slots && columns + system.dimensionAt(end) <= Math.max(UNIT_COLUMNS, system.dimensionAt(slot))) {
        firsts.push(columns);
        columns += system.dimensionAt(end);
        end += 1;
      }
      system.begin(columns);
      firsts.forEach((first, k) => {
        system.loadUnits(first, slot + k);
      });
      system.forward();
      const gram = system.gram(columns);
      system.clear();
      firsts.forEach((first, k) => {
        this.#takeBlock(system, slot + k, gram, columns, first);
      });
      slot = end;
    }
  }

  /** The block of one slot out of the products of unit columns, `columns` square, where its own begin at `first`. */
  #takeBlock(system: System, slot: number, gram: Float64Array, columns: number, first: number): void {
    const d = system.dimensionAt(slot);
    const block = new Float64Array(this.#k.memory.buffer, this.#blockAddress(slot), d * d);
    for (let j = 0; j < d; j += 1) for (let i = 0; i < d; i += 1) block[j * d + i] = gram[(first + j) * columns + first + i]!;
  }

  /** The kept column at new leaves follows from what it holds at their parents. */
  #extendColumn(system: System, from: number): void {
    const scratch = system.scratch(8 * WIDEST);
    for (let slot = from; slot < system.slots; slot += 1)
      this.#k.extendColumn(system.base.ledger, slot, this.#across, this.#places.address, this.#column.address, this.#lead, scratch);
  }

  /** Computes those blocks afresh, each by its path, whose largest past trace passes `limit` times the present one, when they have no more
   *  than `most` unknowns together; the kept column is given up then. The numbers must be current.  @returns whether none is left. */
  renewSuspects(system: System, limit: number, most: number): boolean {
    if (this.ratio <= limit) return true;
    const k = this.#k;
    const room = Math.min(most, system.slots) + 1;
    const list = system.scratch(4 * room);
    const count = k.suspectStates(
      system.base.ledger,
      this.#arrivals.address,
      this.#blocks.address,
      this.#largest.address,
      limit,
      list,
      room,
    );
    if (count >= room) return false;
    const ranks = copyInts(list, count);
    const arrivals = copyInts(this.#arrivals.address, system.slots);
    const slots = Array.from(ranks, (rank) => arrivals[rank]!);
    if (slots.reduce((sum, slot) => sum + system.dimensionAt(slot), 0) > most) return false;
    eachMarginal(system, slots, (s, block) => {
      const d = system.dimensionAt(slots[s]!);
      let trace = 0;
      for (let j = 0; j < d; j += 1) trace += block[j * (d + 1)]!;
      writeFloats(this.#blockAddress(slots[s]!), block);
      writeFloats(this.#largest.address + 8 * ranks[s]!, [trace]);
    });
    this.error = Math.max(this.error, system.bound());
    this.ratio = limit;
    this.#columnState = -1;
    return true;
  }

  #placeOf(slot: number): Int32Array {
    return new Int32Array(this.#k.memory.buffer, this.#places.address + 8 * slot, 2);
  }
  #blockAddress(slot: number): number {
    return this.#blocks.address + 8 * this.#placeOf(slot)[0]!;
  }

  /** The block of one slot, d × d. */
  block(system: System, slot: number): Float64Array {
    return copyFloats(this.#blockAddress(slot), system.dimensionAt(slot) ** 2);
  }
  /** All kept numbers where they lie: good until the next call that changes anything. */
  view(): KeptView {
    const { buffer } = this.#k.memory;
    return {
      blocks: new Float64Array(buffer, this.#blocks.address, this.#size),
      column: new Float64Array(buffer, this.#column.address, this.#lead * this.#across),
      lead: this.#lead,
      across: this.#across,
      places: new Int32Array(buffer, this.#places.address, 2 * this.#slots),
    };
  }

  /** The kept column at one slot, row-major: its dimension × that of the column's state. */
  columnAt(system: System, slot: number): Float64Array {
    const row = this.#placeOf(slot)[1]!;
    const d = system.dimensionAt(slot);
    const part = new Float64Array(d * this.#across);
    for (let c = 0; c < this.#across; c += 1) {
      const from = new Float64Array(this.#k.memory.buffer, this.#column.address + 8 * (c * this.#lead + row), d);
      for (let i = 0; i < d; i += 1) part[i * this.#across + c] = from[i]!;
    }
    return part;
  }

  /** All blocks of `states`, which are all in order of arrival but for those forgotten since the base was built, into `target`. */
  blocksInto(target: Float64Array, system: System, states: readonly number[]): void {
    if (states.length === this.#slots) {
      target.set(new Float64Array(this.#k.memory.buffer, this.#blocks.address, this.#size));
      return;
    }
    let at = 0;
    for (const state of states) {
      const slot = system.slotOf(state);
      const size = system.dimensionAt(slot) ** 2;
      target.set(new Float64Array(this.#k.memory.buffer, this.#blockAddress(slot), size), at);
      at += size;
    }
  }

  /** The kept column at `states`, as for `blocksInto`: by columns, into `target`. */
  columnInto(target: Float64Array, system: System, states: readonly number[]): void {
    const order = target.length / this.#across;
    for (let c = 0; c < this.#across; c += 1) {
      const column = new Float64Array(this.#k.memory.buffer, this.#column.address + 8 * c * this.#lead, this.#order);
      if (states.length === this.#slots) {
        target.set(column, c * order);
        continue;
      }
      let at = c * order;
      for (const state of states) {
        const slot = system.slotOf(state);
        const row = this.#placeOf(slot)[1]!;
        const d = system.dimensionAt(slot);
        target.set(column.subarray(row, row + d), at);
        at += d;
      }
    }
  }

  get columnState(): number {
    return this.#columnState;
  }

  /** Moves current numbers from one system to another that has the same information, and the same states but for forgotten ones. */
  carryOver(from: System, to: System): void {
    if (!this.valid) return;
    if (to.slots !== from.slots) this.#leaveOut(from, to);
    else this.#placeAnew(to);
    this.#rows = to.added;
  }

  /** Keeps the numbers of those states that `to` still has. */
  #leaveOut(from: System, to: System): void {
    const states = to.arrivals(0).map((slot) => to.stateAt(slot));
    const past = new Map(from.arrivals(0).map((slot, rank) => [from.stateAt(slot), rank]));
    const largest = copyFloats(this.#largest.address, from.slots);
    const traces = states.map((state) => largest[past.get(state)!]!);
    const blocks = new Float64Array(states.reduce((sum, state) => sum + to.dimensionAt(to.slotOf(state)) ** 2, 0));
    this.blocksInto(blocks, from, states);
    const column = new Float64Array(this.#across * to.positions);
    this.columnInto(column, from, states);
    this.#placeAnew(to);
    writeFloats(this.#blocks.address, blocks);
    writeFloats(this.#largest.address, traces);
    this.#writeColumn(column);
  }

  #writeColumn(column: Float64Array): void {
    const order = column.length / this.#across;
    for (let c = 0; c < this.#across; c += 1)
      writeFloats(this.#column.address + 8 * c * this.#lead, column.subarray(c * order, (c + 1) * order));
  }

  /** All numbers, to be brought back by `restore`: up to date or not. */
  save(): SavedTracked {
    if (!this.valid) return { ratio: this.ratio, error: this.error, numbers: undefined };
    const column = new Float64Array(this.#across * this.#order);
    for (let c = 0; c < this.#across; c += 1)
      column.set(copyFloats(this.#column.address + 8 * c * this.#lead, this.#order), c * this.#order);
    return {
      ratio: this.ratio,
      error: this.error,
      numbers: {
        slots: this.#slots,
        rows: this.#rows,
        columnState: this.#columnState,
        blocks: copyFloats(this.#blocks.address, this.#size),
        largest: copyFloats(this.#largest.address, this.#slots),
        column,
      },
    };
  }

  /** @param system one that has the leaves and rows, in the same order, of the system that the numbers were saved with. */
  restore(system: System, { ratio, error, numbers }: SavedTracked): void {
    this.ratio = ratio;
    this.error = error;
    this.valid = false;
    if (!numbers) return;
    const { slots, rows, columnState, blocks, largest, column } = numbers;
    this.#placeAnew(system, slots);
    writeFloats(this.#blocks.address, blocks);
    writeFloats(this.#largest.address, largest);
    this.#across = columnState < 0 ? 0 : system.dimensionAt(system.slotOf(columnState));
    if (this.#across > 0) {
      this.#reserveColumn(this.#across);
      this.#writeColumn(column);
    }
    this.#columnState = columnState;
    this.#rows = rows;
    this.valid = true;
  }

  free(): void {
    this.#places.free();
    this.#arrivals.free();
    this.#blocks.free();
    this.#column.free();
    this.#largest.free();
    this.#lead = 0;
    this.#across = 0;
    this.valid = false;
  }
}
