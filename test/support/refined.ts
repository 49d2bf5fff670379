// Columns of Λ⁻¹ by iterative refinement: a factor in doubles, residuals in double-double (Higham, "Accuracy and Stability of Numerical
// Algorithms", ch. 12). Each step gains the digits that the factor has; it must gain until the correction is nothing.
import { type CholeskyFactor, factorize, SymmetricMatrix } from "../../src/index.js";
import { Pairs } from "./envelope.js";
import type { ExactSums } from "./exact-twin.js";

const SPLITTER = 134217729;

/** rest[i] −= a · x[j]: the pair operations of double-double.ts written out for a double times a pair. */
function subtractProduct(rest: Pairs, i: number, a: number, x: Pairs, j: number): void {
  const y = x.hi[j]!;
  if (y === 0) return;
  const product = -a * y;
  const ca = SPLITTER * -a;
  const cy = SPLITTER * y;
  const ah = ca - (ca + a);
  const yh = cy - (cy - y);
  const al = -a - ah;
  const yl = y - yh;
  const error = al * yl - (product - ah * yh - al * yh - ah * yl) - a * x.lo[j]!;
  const hi = rest.hi[i]!;
  const sum = hi + product;
  const of = sum - hi;
  const left = hi - (sum - of) + (product - of) + (rest.lo[i]! + error);
  rest.hi[i] = sum + left;
  rest.lo[i] = left - (rest.hi[i]! - sum);
}

export class Refined {
  readonly #factor: CholeskyFactor;
  readonly #order: number;
  readonly #columnPointers: Int32Array;
  readonly #rowIndices: Int32Array;
  readonly #values: Float64Array;

  constructor(sums: ExactSums) {
    const { order, columnPointers, rowIndices, values } = sums.columns();
    this.#order = order;
    this.#columnPointers = Int32Array.from(columnPointers);
    this.#rowIndices = Int32Array.from(rowIndices);
    this.#values = Float64Array.from(values);
    this.#factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }));
  }

  /** Column `unknown`, good to 20 digits of its largest entry or so. @throws when refinement does not get there. */
  column(unknown: number): Pairs {
    const n = this.#order;
    const x = new Pairs(n);
    x.hi.set(this.#factor.inverseColumns([unknown]));
    for (let step = 0; step < 12; step += 1) {
      const rest = new Pairs(n);
      rest.hi[unknown] = 1;
      for (let j = 0; j < n; j += 1) {
        for (let p = this.#columnPointers[j]!; p < this.#columnPointers[j + 1]!; p += 1) {
          const i = this.#rowIndices[p]!;
          const value = this.#values[p]!;
          subtractProduct(rest, i, value, x, j);
          if (i !== j) subtractProduct(rest, j, value, x, i);
        }
      }
      const correction = this.#factor.solve(rest.hi);
      let size = 0;
      let change = 0;
      for (let i = 0; i < n; i += 1) {
        const sum = x.hi[i]! + correction[i]!;
        const of = sum - x.hi[i]!;
        const left = x.hi[i]! - (sum - of) + (correction[i]! - of) + x.lo[i]!;
        x.hi[i] = sum + left;
        x.lo[i] = left - (x.hi[i]! - sum);
        size = Math.max(size, Math.abs(sum));
        change = Math.max(change, Math.abs(correction[i]!));
      }
      if (change <= 1e-20 * size) return x;
    }
    throw new Error("refinement does not converge");
  }

  /** The block of Σ at the `dimension` unknowns from `first` on, row-major, rounded to doubles. */
  block(first: number, dimension: number): Float64Array {
    const columns = Array.from({ length: dimension }, (_, u) => this.column(first + u));
    return Float64Array.from({ length: dimension ** 2 }, (_, k) => columns[k % dimension]!.hi[first + Math.floor(k / dimension)]!);
  }

  dispose(): void {
    this.#factor.dispose();
  }
}
