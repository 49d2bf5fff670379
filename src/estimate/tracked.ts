// Marginals kept current: all diagonal blocks of Σ by slot, and one block column of it. Brought up to date when they are read, by what
// the rows since have changed; or computed afresh when that is cheaper or more exact.
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, copyFloats, writeFloats } from "../../bindings/memory.js";
import type { System } from "./system.js";

/** Unit columns carried forward together for blocks of new states: their product is square in this. */
const UNIT_COLUMNS = 24;

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

/** Kept numbers as they were saved. */
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
        readonly column: Float64Array;
      }
    | undefined;
}

export class Tracked {
  readonly #k = kernel();
  /** Blocks by slot, d × d each; the column, its dimension side by side for each position; its successor; largest past traces by slot. */
  readonly #blocks = new Room();
  #column = new Room();
  #nextColumn = new Room();
  readonly #largest = new Room();
  /** First f64 of each slot's block, one more at the end. */
  readonly #blockStart: number[] = [0];
  /** Added rows and slots that the numbers include. */
  #rows = 0;
  /** The state whose column is kept, −1: none at present. */
  #columnState = -1;
  /** False: nothing here is meaningful until it is computed afresh. */
  valid = false;
  /** Largest ratio of a block's past trace to its trace now: what subtraction may have cost in digits. */
  ratio = 1;
  /** The largest bound under which any part of the numbers was computed, relative to the largest trace that a block has had since. */
  error = 0;

  /** Whether the numbers include all rows and slots. */
  isCurrent(system: System, column: number): boolean {
    return this.valid && this.#rows === system.added && this.slots === system.slots && this.#columnState === column;
  }
  get slots(): number {
    return this.#blockStart.length - 1;
  }
  /** Added rows that the numbers include. */
  get rows(): number {
    return this.#rows;
  }
  /** Rows that came since. */
  owed(system: System): number {
    return system.added - this.#rows;
  }

  /** Computes all blocks afresh from the selected inverse of a base without leaves and rows. */
  recompute(system: System): void {
    const k = this.#k;
    const { factor, ledger } = system.base;
    this.valid = false;
    this.#rows = 0;
    this.#columnState = -1;
    this.#blockStart.length = 1;
    this.#reserveBlocks(system);
    const inverse = addressOrThrow("The selected inverse", k.inverseBegin(factor, 1), k.inverseBytes(system.base.symbolic, 1));
    while (k.inverseAdvance(inverse, 1e18) === status.running);
    k.blocksOfInverse(ledger, inverse, this.#blocks.address);
    k.inverseRelease(inverse);
    this.#forgetPast(system);
    this.valid = true;
  }

  /** Computes all blocks afresh by forward solves through base, leaves and ledger: where no better base can be had. */
  fromLedger(system: System): void {
    this.valid = false;
    this.#columnState = -1;
    this.#blockStart.length = 1;
    this.#reserveBlocks(system);
    this.#blocksOfLeaves(system, 0);
    this.#rows = system.added;
    this.#forgetPast(system);
    this.valid = true;
  }

  #forgetPast(system: System): void {
    this.#largest.reserve(8 * system.slots, 0);
    new Float64Array(this.#k.memory.buffer, this.#largest.address, system.slots).fill(0);
    this.ratio = this.#k.traceRatio(system.base.ledger, this.#blocks.address, this.#largest.address);
    this.error = system.bound();
  }

  #reserveBlocks(system: System, slots = system.slots): void {
    const used = 8 * this.#blockStart.at(-1)!;
    const before = this.slots;
    for (let slot = before; slot < slots; slot += 1) this.#blockStart.push(this.#blockStart.at(-1)! + system.dimensionAt(slot) ** 2);
    this.#blocks.reserve(8 * this.#blockStart.at(-1)!, used);
    this.#largest.reserve(8 * slots, 8 * before);
    new Float64Array(this.#k.memory.buffer, this.#largest.address + 8 * before, slots - before).fill(0);
  }

  /** Brings blocks and the column of `column` (−1: none) up to date. Requires that nothing is removed in the ledger beyond what the
   *  numbers include. */
  refresh(system: System, column: number): void {
    if (this.isCurrent(system, column)) return;
    const k = this.#k;
    const { ledger } = system.base;
    const since = this.#rows;
    const rows = system.removed === 0 ? system.added - since : 0;
    const wasSlots = this.slots;
    this.#reserveBlocks(system);
    const target = column < 0 ? -1 : system.slotOf(column);
    this.error = Math.max(this.error, system.bound());
    const counted = k.countAdded(ledger, since + (system.added - since - rows));
    try {
      // New states first, as they stood before the rows that came since.
      const followed = this.#followLeaf(system, wasSlots, target);
      this.#blocksOfLeaves(system, followed ? wasSlots + 1 : wasSlots);
      const fresh = target >= 0 && !followed && this.#columnState !== column;
      if (!fresh && target >= 0 && !followed && wasSlots < system.slots) this.#extendColumn(system, target, wasSlots);
      const across = fresh ? system.dimensionAt(target) : 0;
      if (rows + across > 0) {
        system.begin(rows + across);
        if (across > 0) {
          system.loadUnits(rows, target);
          system.forward();
        }
        if (rows > 0) {
          k.loadKept(ledger, since, rows);
          k.scaleColumns(ledger, rows);
        }
        system.back();
        this.#apply(system, rows, 0, rows, fresh, target);
        system.clear();
      }
      this.#columnState = column;
      this.#rows = counted;
    } finally {
      k.countAdded(ledger, counted);
    }
  }

  /** Blocks and column after `plus` and `minus` rows that are loaded, carried forward, scaled and carried back. */
  #apply(system: System, plus: number, minus: number, from: number, fresh: boolean, target: number): void {
    const k = this.#k;
    const { ledger } = system.base;
    if (plus + minus > 0) {
      k.updateBlocks(ledger, plus, minus, 0, system.slots, this.#blocks.address);
      this.ratio = k.traceRatio(ledger, this.#blocks.address, this.#largest.address);
    }
    if (target < 0) return;
    if (fresh) {
      this.#column.reserve(8 * system.positions * system.dimensionAt(target), 0);
      k.takeColumn(ledger, from, target, this.#column.address);
    }
    if (plus + minus > 0) k.updateColumn(ledger, plus, minus, target, this.#column.address);
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
    this.#apply(system, plus, minus, 0, false, this.#columnState < 0 ? -1 : system.slotOf(this.#columnState));
    return true;
  }

  /** After settling a signed batch, or dropping rows. */
  count(system: System): void {
    this.#rows = system.added;
    this.error = Math.max(this.error, system.bound());
  }

  /** One new leaf whose only parent is the state of the kept column: its block and column follow from the parent's. */
  #followLeaf(system: System, slot: number, target: number): boolean {
    if (slot + 1 !== system.slots || target !== slot || this.#columnState < 0) return false;
    const event = system.events.findLast((e) => e.kind === "leaf");
    if (event?.leaf.parents.length !== 1 || event.leaf.parents[0] !== this.#columnState) return false;
    const d = system.dimensionAt(slot);
    const dp = system.dimensionAt(system.slotOf(this.#columnState));
    this.#nextColumn.reserve(8 * system.positions * d, 0);
    const scratch = system.scratch(8 * (4 * d * d + 2 * d * dp + 64));
    this.#k.leafColumn(system.base.ledger, slot, this.#column.address, this.#nextColumn.address, this.#blockAddress(slot), scratch);
    [this.#column, this.#nextColumn] = [this.#nextColumn, this.#column];
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
        const d = system.dimensionAt(slot + k);
        const block = new Float64Array(d * d);
        for (let j = 0; j < d; j += 1) for (let i = 0; i < d; i += 1) block[j * d + i] = gram[(first + j) * columns + first + i]!;
        writeFloats(this.#blockAddress(slot + k), block);
      });
      slot = end;
    }
  }

  /** The kept column at new leaves: −R⁻¹ Σ G_p × the column at the parents. */
  #extendColumn(system: System, target: number, from: number): void {
    const across = system.dimensionAt(target);
    const used = 8 * system.positionOf(from) * across;
    this.#column.reserve(8 * system.positions * across, used);
    const column = copyFloats(this.#column.address, system.positions * across);
    const leaves = system.events.flatMap((event) => (event.kind === "leaf" ? [event.leaf] : []));
    for (const leaf of leaves.slice(leaves.length - (system.slots - from))) {
      const slot = system.slotOf(leaf.state);
      const d = leaf.dimension;
      const at = system.positionOf(slot);
      for (let c = 0; c < across; c += 1) {
        // Solve R x = −Σ G x_p, R upper: row i of R is column i of L.
        const x = new Float64Array(d);
        let g = d * d;
        for (const parent of leaf.parents) {
          const p = system.slotOf(parent);
          for (let u = 0; u < system.dimensionAt(p); u += 1, g += d) {
            const value = column[(system.positionOf(p) + u) * across + c]!;
            for (let i = 0; i < d; i += 1) x[i]! -= leaf.numbers[g + i]! * value;
          }
        }
        for (let i = d - 1; i >= 0; i -= 1) {
          for (let j = i + 1; j < d; j += 1) x[i]! -= leaf.numbers[i * d + j]! * x[j]!;
          x[i]! /= leaf.numbers[i * d + i]!;
          column[(at + i) * across + c] = x[i]!;
        }
      }
    }
    writeFloats(this.#column.address + used, column.subarray(used / 8));
  }

  #blockAddress(slot: number): number {
    return this.#blocks.address + 8 * this.#blockStart[slot]!;
  }

  /** The block of one slot, d × d. */
  block(slot: number): Float64Array {
    return copyFloats(this.#blockAddress(slot), this.#blockStart[slot + 1]! - this.#blockStart[slot]!);
  }
  /** All blocks and the column as they lie in kernel memory: good until the next kernel call. */
  viewBlocks(): Float64Array {
    return new Float64Array(this.#k.memory.buffer, this.#blocks.address, this.#blockStart.at(-1)!);
  }
  viewColumn(system: System, across: number): Float64Array {
    return new Float64Array(this.#k.memory.buffer, this.#column.address, across * system.positions);
  }
  /** All blocks, by slot. */
  allBlocks(): Float64Array {
    return copyFloats(this.#blocks.address, this.#blockStart.at(-1)!);
  }
  blockStart(slot: number): number {
    return this.#blockStart[slot]!;
  }
  /** The kept column at one slot, `across` numbers for each unknown. */
  columnAt(system: System, slot: number, across: number): Float64Array {
    return copyFloats(this.#column.address + 8 * across * system.positionOf(slot), across * system.dimensionAt(slot));
  }
  wholeColumn(system: System, across: number): Float64Array {
    return copyFloats(this.#column.address, across * system.positions);
  }
  get columnState(): number {
    return this.#columnState;
  }

  /** Moves current numbers from one system to another that has the same states and information. */
  carryOver(from: System, to: System): void {
    if (!this.valid) return;
    const blocks = this.allBlocks();
    const largest = copyFloats(this.#largest.address, from.slots);
    const starts = this.#blockStart.slice();
    const across = this.#columnState < 0 ? 0 : from.dimensionAt(from.slotOf(this.#columnState));
    const column = across ? this.wholeColumn(from, across) : new Float64Array(0);
    this.#blockStart.length = 1;
    this.#reserveBlocks(to);
    const moved = new Float64Array(blocks.length);
    const movedLargest = new Float64Array(to.slots);
    const movedColumn = new Float64Array(column.length);
    for (let slot = 0; slot < to.slots; slot += 1) {
      const old = from.slotOf(to.stateAt(slot));
      moved.set(blocks.subarray(starts[old]!, starts[old + 1]!), this.#blockStart[slot]!);
      movedLargest[slot] = largest[old]!;
      if (across > 0) {
        const at = from.positionOf(old) * across;
        movedColumn.set(column.subarray(at, at + from.dimensionAt(old) * across), to.positionOf(slot) * across);
      }
    }
    writeFloats(this.#blocks.address, moved);
    writeFloats(this.#largest.address, movedLargest);
    if (across > 0) {
      this.#column.reserve(8 * movedColumn.length, 0);
      writeFloats(this.#column.address, movedColumn);
    }
    this.#rows = to.added;
  }

  /** All numbers, to be brought back by `restore`: up to date or not. */
  save(system: System): SavedTracked {
    if (!this.valid) return { ratio: this.ratio, error: this.error, numbers: undefined };
    const across = this.#columnState < 0 ? 0 : system.dimensionAt(system.slotOf(this.#columnState));
    return {
      ratio: this.ratio,
      error: this.error,
      numbers: {
        slots: this.slots,
        rows: this.#rows,
        columnState: this.#columnState,
        blocks: this.allBlocks(),
        largest: copyFloats(this.#largest.address, this.slots),
        column: copyFloats(this.#column.address, across * system.positionOf(this.slots)),
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
    this.#blockStart.length = 1;
    this.#reserveBlocks(system, slots);
    writeFloats(this.#blocks.address, blocks);
    writeFloats(this.#largest.address, largest);
    this.#column.reserve(8 * column.length, 0);
    writeFloats(this.#column.address, column);
    this.#columnState = columnState;
    this.#rows = rows;
    this.valid = true;
  }

  free(): void {
    this.#blocks.free();
    this.#column.free();
    this.#nextColumn.free();
    this.#largest.free();
    this.valid = false;
  }
}
