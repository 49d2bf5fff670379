// Arrays to and from kernel memory. A view is made fresh for every copy, since growing memory detaches the views before; none is
// handed out.
import { MemoryLimitError } from "./errors.js";
import { kernel } from "./loader.js";

/** Bytes that can still be asked for in all. Fragmentation and the engine may grant less. */
export const bytesAvailable = (): number => Math.max(0, kernel().memoryLimit() - kernel().memoryUsed());

/** Refuses work whose memory the limit does not leave, before it starts. */
export function requireMemory(what: string, bytes: number): void {
  if (bytes > bytesAvailable()) throw new MemoryLimitError(what, bytes, bytesAvailable());
}

/** The address that a kernel call returned, unsigned; a zero means that its memory was not to be had. */
export function addressOrThrow(what: string, raw: number, bytesNeeded: number): number {
  if (raw === 0) throw new MemoryLimitError(what, bytesNeeded, bytesAvailable());
  return raw >>> 0;
}

/** Blocks of kernel memory with one owner, who gives them all back at once. */
export class Loan {
  readonly #addresses: number[] = [];
  readonly #what: string;

  /** @param what what the memory is for, as an error would say it. */
  constructor(what: string) {
    this.#what = what;
  }

  room(bytes: number): number {
    if (bytes > 0xffffffff) throw new MemoryLimitError(this.#what, bytes, bytesAvailable());
    const address = addressOrThrow(this.#what, kernel().allocate(bytes), bytes);
    this.#addresses.push(address);
    return address;
  }

  ints(values: ArrayLike<number>): number {
    const address = this.room(values.length * 4);
    new Int32Array(kernel().memory.buffer, address, values.length).set(values);
    return address;
  }

  floats(values: ArrayLike<number>): number {
    const address = this.room(values.length * 8);
    writeFloats(address, values);
    return address;
  }

  giveBack(): void {
    for (const address of this.#addresses.splice(0)) kernel().release(address);
  }
}

/** Runs `use` with memory that is given back whatever happens. */
export function withLoan<T>(what: string, use: (loan: Loan) => T): T {
  const loan = new Loan(what);
  try {
    return use(loan);
  } finally {
    loan.giveBack();
  }
}

export function writeFloats(address: number, values: ArrayLike<number>): void {
  new Float64Array(kernel().memory.buffer, address, values.length).set(values);
}

/** Copies kernel memory into `target`. */
export function readFloatsInto(target: Float64Array, address: number): void {
  target.set(new Float64Array(kernel().memory.buffer, address, target.length));
}

export const copyFloats = (address: number, length: number): Float64Array =>
  new Float64Array(kernel().memory.buffer, address, length).slice();

export const copyInts = (address: number, length: number): Int32Array => new Int32Array(kernel().memory.buffer, address, length).slice();
