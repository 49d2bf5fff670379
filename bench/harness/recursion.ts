// The published recursion for the selected inverse (bench/recursion/recursion.ts) on a factor given by columns.
import { type BenchModule, benchModule } from "./bench-module.js";

/** L by columns: rows ascending, the diagonal entry first in each. */
export interface FactorColumns {
  readonly order: number;
  readonly columnPointers: Int32Array;
  readonly rowIndices: Int32Array;
  readonly values: Float64Array;
}

let built: BenchModule | undefined;

/** L in the module's memory; `run` is the part to time: no copies, no allocation. */
export class Recursion {
  readonly #module: BenchModule;
  readonly #blocks: number[] = [];
  readonly #arguments: readonly number[];
  readonly #entries: number;

  constructor({ order, columnPointers, rowIndices, values }: FactorColumns) {
    built ??= benchModule("bench/recursion/recursion.ts");
    this.#module = built;
    this.#entries = values.length;
    let longest = 0;
    for (let j = 0; j < order; j += 1) longest = Math.max(longest, columnPointers[j + 1]! - columnPointers[j]!);
    const places = [this.#copy(columnPointers), this.#copy(rowIndices), this.#copy(values), this.#room(values.length), this.#room(longest)];
    this.#arguments = [order, ...places];
  }

  run(): void {
    this.#module.calls.selectedInverse!(...this.#arguments);
  }

  /** The inverse on the pattern of L, place by place, after `run`. */
  inverse(): Float64Array {
    return new Float64Array(this.#module.memory.buffer, this.#arguments[4]!, this.#entries).slice();
  }

  release(): void {
    for (const block of this.#blocks.splice(0)) this.#module.calls.release!(block);
  }

  #room(numbers: number): number {
    const address = this.#module.calls.allocate!(8 * Math.max(numbers, 1)) >>> 0;
    if (address === 0) throw new Error("the bench module's memory is used up");
    this.#blocks.push(address);
    return address;
  }

  #copy(values: Int32Array | Float64Array): number {
    const address = this.#room(values.length);
    new (values.constructor as Float64ArrayConstructor)(this.#module.memory.buffer, address, values.length).set(values);
    return address;
  }
}
