// A list of 32-bit whole numbers that grows by doubling: what a plain array would hold, at a quarter of its memory and filled faster.

export class IntList {
  #values: Int32Array;
  length = 0;

  /** @param room numbers that fit before it grows for the first time. */
  constructor(room = 64) {
    this.#values = new Int32Array(Math.max(1, room));
  }

  push(value: number): void {
    if (this.length === this.#values.length) this.#grow(this.length + 1);
    this.#values[this.length] = value;
    this.length += 1;
  }

  /** Undefined beyond the end of the room: check the index first. */
  at(k: number): number {
    return this.#values[k]!;
  }

  /** Sets one number; what lies between it and the end so far becomes `fill`. */
  set(k: number, value: number, fill: number): void {
    if (k >= this.length) {
      if (k >= this.#values.length) this.#grow(k + 1);
      this.#values.fill(fill, this.length, k);
      this.length = k + 1;
    }
    this.#values[k] = value;
  }

  #grow(length: number): void {
    const grown = new Int32Array(2 * length);
    grown.set(this.#values.subarray(0, this.length));
    this.#values = grown;
  }

  /** The numbers themselves, with room behind them; good until the next `push` or `set`. */
  get values(): Int32Array {
    return this.#values;
  }
}
