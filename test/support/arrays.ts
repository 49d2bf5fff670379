// Arrays to and from kernel memory, for tests of the raw exports.
import type { RawKernel } from "./kernel.js";

/** Copies `values` into fresh kernel memory and gives its address; the test releases it. */
export function intoKernel({ raw, memory }: RawKernel, values: Int32Array | Float64Array): number {
  const address = raw.allocate!(Math.max(values.byteLength, 8)) >>> 0;
  if (address === 0) throw new Error("kernel memory is used up");
  new (values.constructor as Float64ArrayConstructor)(memory.buffer, address, values.length).set(values);
  return address;
}

export const emptyInts = (kernel: RawKernel, length: number): number => intoKernel(kernel, new Int32Array(length));

export const intsAt = ({ memory }: RawKernel, address: number, length: number): Int32Array =>
  new Int32Array(memory.buffer, address >>> 0, length).slice();

export const floatsAt = ({ memory }: RawKernel, address: number, length: number): Float64Array =>
  new Float64Array(memory.buffer, address >>> 0, length).slice();
