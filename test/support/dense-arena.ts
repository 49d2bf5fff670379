// One stretch of kernel memory, filled with NaN, in which a test lays out its matrices at chosen (odd) offsets: what a kernel
// touches outside its own entries, or reads and lets into a result, shows.
import { expect } from "vitest";
import { Cells } from "./dense-twins.js";
import { kernelBuild, type RawKernel } from "./kernel.js";

/** Unit roundoff of f64, and γ_k = k·u ÷ (1 − k·u): Higham, Accuracy and Stability of Numerical Algorithms, section 3.1. */
const roundoff = 2 ** -53;
export const gamma = (k: number): number => (k * roundoff) / (1 - k * roundoff);

export class Arena {
  private next = 1; // one element off: no matrix stands on a multiple of 16 bytes unless a test pads it
  readonly values: Float64Array;
  private readonly base: number;
  constructor(
    private readonly kernel: RawKernel,
    private readonly length: number,
    private readonly random: () => number,
  ) {
    this.values = new Float64Array(length).fill(Number.NaN);
    this.base = kernel.raw.allocate!(8 * length) >>> 0;
    if (this.base === 0) throw new Error("kernel memory is used up");
  }
  private take(size: number): number {
    const at = this.next;
    this.next += size + 2;
    if (this.next > this.length) throw new Error(`the arena of ${this.length} is too small`);
    return at;
  }
  /** Element index of a rows × cols matrix with entries uniform in (−1, 1). */
  matrix(rows: number, cols: number, ld: number): number {
    const at = this.take(ld * cols);
    for (let j = 0; j < cols; j += 1) for (let i = 0; i < rows; i += 1) this.values[at + i + j * ld] = 2 * this.random() - 1;
    return at;
  }
  /** A lower triangle or trapezoid, unit-sized entries, the diagonal in (1, 2); above it NaN. */
  trapezoid(rows: number, cols: number, ld: number): number {
    const at = this.matrix(rows, cols, ld);
    for (let j = 0; j < cols; j += 1) {
      for (let i = 0; i < j; i += 1) this.values[at + i + j * ld] = Number.NaN;
      this.values[at + j + j * ld] = 1 + Math.abs(this.values[at + j + j * ld]!);
    }
    return at;
  }
  /** Room that a call fills: NaN. */
  empty(rows: number, cols: number, ld: number): number {
    return this.take(Math.max(ld * cols, rows));
  }
  /** Runs a kernel call (indices turned into addresses by `at`) and a twin on the same entries, and compares.
   *  Nothing outside the twin's writes may change; its writes agree in every bit unless the build fuses. */
  agree(
    call: (raw: RawKernel["raw"], at: (index: number) => number) => number | undefined,
    twin: (cells: Cells) => number | undefined,
  ): Cells {
    const view = () => new Float64Array(this.kernel.memory.buffer, this.base, this.length);
    view().set(this.values);
    const got = call(this.kernel.raw, (index) => this.base + 8 * index);
    const after = view().slice();
    const cells = new Cells(this.values.slice());
    const wanted = twin(cells);
    const fused = kernelBuild === "fused";
    const bits = (values: Float64Array) => new BigUint64Array(values.buffer, values.byteOffset, values.length);
    const [found, hoped, before] = [bits(after), bits(cells.values), bits(this.values)];
    for (let k = 0; k < this.length; k += 1) {
      if (!cells.touched.has(k)) {
        if (found[k] !== before[k]) expect.fail(`entry ${k}, outside the result, changed from ${this.values[k]} to ${after[k]}`);
      } else if (!fused && found[k] !== hoped[k]) expect.fail(`entry ${k} is ${after[k]}, not ${cells.values[k]}`);
      else if (Number.isNaN(after[k])) expect.fail(`entry ${k} is not a number`);
    }
    if (!fused || Number.isInteger(wanted)) expect(got).toBe(wanted);
    const result = new Cells(after);
    for (const k of cells.touched) result.touched.add(k);
    return result;
  }
  dispose(): void {
    this.kernel.raw.release!(this.base);
  }
}

/** x + y and x·y as unevaluated sums of two doubles: Dekker (1971), Numerische Mathematik 18. */
function twoProduct(x: number, y: number): [number, number] {
  const split = (v: number): [number, number] => {
    const c = 134217729 * v;
    const high = c - (c - v);
    return [high, v - high];
  };
  const [a, b] = split(x);
  const [c, d] = split(y);
  const product = x * y;
  return [product, b * d - (product - a * c - b * c - a * d)];
}

/** start + Σ terms, in twice the working precision (Ogita, Rump, Oishi 2005, SIAM J. Sci. Comput. 26), and Σ of magnitudes. */
export function preciseSum(start: number, terms: readonly (readonly [number, number])[]): { sum: number; magnitude: number } {
  let high = start;
  let low = 0;
  let magnitude = Math.abs(start);
  for (const [x, y] of terms) {
    const [product, error] = twoProduct(x, y);
    const sum = high + product;
    const part = sum - high;
    low += high - (sum - part) + (product - part) + error;
    high = sum;
    magnitude += Math.abs(x * y);
  }
  return { sum: high + low, magnitude };
}
