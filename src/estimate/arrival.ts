// Where the states stand in the system's positions, in order of arrival: made once a base, extended as states arrive.
import { IntList } from "../support/int-list.js";
import type { System } from "./system.js";

export class ArrivalOrder {
  #system: System | undefined;
  #states: readonly number[] = [];
  #count = 0;
  /** Position of each unknown. */
  readonly #positions = new IntList();

  /** Brings the tables up to date for `states`, committed and in order of arrival; the same array, only longer, while none is forgotten.
   *  Cost: what has come since; all of it on a new base. */
  follow(system: System, states: readonly number[]): void {
    if (system !== this.#system || states !== this.#states || states.length < this.#count) {
      this.#system = system;
      this.#states = states;
      this.#count = 0;
      this.#positions.length = 0;
    }
    for (; this.#count < states.length; this.#count += 1) {
      const slot = system.slotOf(states[this.#count]!);
      for (let p = system.positionOf(slot), end = system.positionOf(slot + 1); p < end; p += 1) this.#positions.push(p);
    }
  }

  /** Unknowns of all states. */
  get order(): number {
    return this.#positions.length;
  }

  /** Numbers that lie `across` side by side for each position, as columns: order × across, column-major, into `target`. */
  columnInto(target: Float64Array, source: Float64Array, across: number): void {
    const positions = this.#positions.values;
    const { order } = this;
    for (let row = 0; row < order; row += 1) {
      const at = positions[row]! * across;
      for (let j = 0; j < across; j += 1) target[j * order + row] = source[at + j]!;
    }
  }
}
