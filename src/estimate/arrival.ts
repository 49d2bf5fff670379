// Where the states stand in the system's positions, in order of arrival: made once a base, extended as states arrive.
import type { System } from "./system.js";
import type { Tracked } from "./tracked.js";

/** A list that grows by doubling. */
class Places {
  #values = new Int32Array(64);
  length = 0;
  push(value: number): void {
    if (this.length === this.#values.length) {
      const grown = new Int32Array(2 * this.length);
      grown.set(this.#values);
      this.#values = grown;
    }
    this.#values[this.length] = value;
    this.length += 1;
  }
  clear(): void {
    this.length = 0;
  }
  get values(): Int32Array {
    return this.#values;
  }
}

export class ArrivalOrder {
  #system: System | undefined;
  #states: readonly number[] = [];
  #count = 0;
  /** Position of each unknown; slot of each state. */
  readonly #positions = new Places();
  readonly #slots = new Places();

  /** Brings the tables up to date for `states`, committed and in order of arrival; the same array, only longer, while none is forgotten.
   *  Cost: what has come since; all of it on a new base. */
  follow(system: System, states: readonly number[]): void {
    if (system !== this.#system || states !== this.#states || states.length < this.#count) {
      this.#system = system;
      this.#states = states;
      this.#count = 0;
      this.#positions.clear();
      this.#slots.clear();
    }
    for (; this.#count < states.length; this.#count += 1) {
      const slot = system.slotOf(states[this.#count]!);
      this.#slots.push(slot);
      for (let p = system.positionOf(slot), end = system.positionOf(slot + 1); p < end; p += 1) this.#positions.push(p);
    }
  }

  /** Unknowns of all states. */
  get order(): number {
    return this.#positions.length;
  }

  /** Kept numbers that lie `across` side by side for each position, as columns: order × across, column-major, into `target`. */
  columnInto(target: Float64Array, source: Float64Array, across: number): void {
    const positions = this.#positions.values;
    const { order } = this;
    for (let row = 0; row < order; row += 1) {
      const at = positions[row]! * across;
      for (let j = 0; j < across; j += 1) target[j * order + row] = source[at + j]!;
    }
  }

  /** Kept blocks, one after another, into `target`. */
  blocksInto(target: Float64Array, tracked: Tracked, source: Float64Array): void {
    const slots = this.#slots.values;
    for (let k = 0, at = 0; k < this.#slots.length; k += 1) {
      const end = tracked.blockStart(slots[k]! + 1);
      for (let p = tracked.blockStart(slots[k]!); p < end; p += 1) target[at++] = source[p]!;
    }
  }
}
