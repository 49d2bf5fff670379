// Cholesky factor of a symmetric positive definite matrix in double-double arithmetic, in the given order, over the envelope: each row of L
// from its first entry to the diagonal (Jennings 1966; George, Liu, "Computer Solution of Large Sparse Positive Definite Systems", 1981, ch. 4).
// Small for chains and bands, plain dense Cholesky for a full matrix. A reference to hold double results against, not a fast solver.
import { add, type DoubleDouble, divide, multiply, squareRoot, subtract, zero } from "./double-double.js";

/** A symmetric matrix by columns of its lower triangle. Duplicates add up. */
export interface LowerColumns {
  readonly order: number;
  readonly columnPointers: ArrayLike<number>;
  readonly rowIndices: ArrayLike<number>;
  readonly values: ArrayLike<number>;
}

/** Pairs in two arrays. */
export class Pairs {
  readonly hi: Float64Array;
  readonly lo: Float64Array;
  constructor(length: number) {
    this.hi = new Float64Array(length);
    this.lo = new Float64Array(length);
  }
  get(k: number): DoubleDouble {
    return [this.hi[k]!, this.lo[k]!];
  }
  set(k: number, [hi, lo]: DoubleDouble): void {
    this.hi[k] = hi;
    this.lo[k] = lo;
  }
}

/** target − Σ a[from + k] · b[start + k]: the inner loop, with the pair operations of double-double.ts written out. */
function lessDot([targetHi, targetLo]: DoubleDouble, a: Pairs, from: number, b: Pairs, start: number, count: number): DoubleDouble {
  const splitter = 134217729;
  let hi = targetHi;
  let lo = targetLo;
  for (let k = 0; k < count; k += 1) {
    const x = -a.hi[from + k]!;
    const y = b.hi[start + k]!;
    const product = x * y;
    const cx = splitter * x;
    const cy = splitter * y;
    const xh = cx - (cx - x);
    const yh = cy - (cy - y);
    const xl = x - xh;
    const yl = y - yh;
    const error = xl * yl - (product - xh * yh - xl * yh - xh * yl) + (x * b.lo[start + k]! - a.lo[from + k]! * y);
    const sum = hi + product;
    const of = sum - hi;
    const rest = hi - (sum - of) + (product - of) + (lo + error);
    hi = sum + rest;
    lo = rest - (hi - sum);
  }
  return [hi, lo];
}

export class EnvelopeCholesky {
  readonly order: number;
  /** First column of each row's envelope. */
  readonly #first: Int32Array;
  /** Where row i's column 0 would stand: entry (i, j) is at #base[i] + j. */
  readonly #base: Float64Array;
  readonly #factor: Pairs;

  /** @throws when a pivot is not positive, with its index. */
  constructor({ order, columnPointers, rowIndices, values }: LowerColumns) {
    this.order = order;
    this.#first = Int32Array.from({ length: order }, (_, i) => i);
    for (let j = 0; j < order; j += 1) {
      for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
        if (rowIndices[p]! < j) throw new Error(`entry (${rowIndices[p]}, ${j}) is above the diagonal`);
        this.#first[rowIndices[p]!] = Math.min(this.#first[rowIndices[p]!]!, j);
      }
    }
    this.#base = new Float64Array(order);
    let size = 0;
    for (let i = 0; i < order; i += 1) {
      this.#base[i] = size - this.#first[i]!;
      size += i - this.#first[i]! + 1;
    }
    this.#factor = new Pairs(size);
    for (let j = 0; j < order; j += 1) {
      for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
        const at = this.#base[rowIndices[p]!]! + j;
        this.#factor.set(at, add(this.#factor.get(at), [values[p]!, 0]));
      }
    }
    this.#factorize();
  }

  #factorize(): void {
    const L = this.#factor;
    for (let i = 0; i < this.order; i += 1) {
      const row = this.#base[i]!;
      for (let j = this.#first[i]!; j <= i; j += 1) {
        const from = Math.max(this.#first[i]!, this.#first[j]!);
        const rest = lessDot(L.get(row + j), L, row + from, L, this.#base[j]! + from, j - from);
        if (j === i && !(rest[0] > 0)) throw new Error(`pivot ${rest[0]} of unknown ${i} is not positive`);
        L.set(row + j, j === i ? squareRoot(rest) : divide(rest, this.#diagonal(j)));
      }
    }
  }

  #diagonal(i: number): DoubleDouble {
    return this.#factor.get(this.#base[i]! + i);
  }

  solve(rhs: ArrayLike<number>): Pairs {
    const x = new Pairs(this.order);
    for (let i = 0; i < this.order; i += 1) x.hi[i] = rhs[i]!;
    this.#solveFrom(x, 0);
    return x;
  }

  /** Column j of the inverse. */
  inverseColumn(j: number): Pairs {
    const x = new Pairs(this.order);
    x.hi[j] = 1;
    this.#solveFrom(x, j);
    return x;
  }

  /** All right-hand sides before row `start` are zero. */
  #solveFrom(x: Pairs, start: number): void {
    const L = this.#factor;
    for (let i = start; i < this.order; i += 1) {
      const from = Math.max(this.#first[i]!, start);
      x.set(i, divide(lessDot(x.get(i), L, this.#base[i]! + from, x, from, i - from), this.#diagonal(i)));
    }
    for (let i = this.order - 1; i >= 0; i -= 1) {
      const value = divide(x.get(i), this.#diagonal(i));
      x.set(i, value);
      for (let j = this.#first[i]!; j < i; j += 1) x.set(j, subtract(x.get(j), multiply(L.get(this.#base[i]! + j), value)));
    }
  }

  /** Diagonal blocks of the inverse of these sizes, row-major, each entry rounded to double: products of the columns of L⁻¹. Dense. */
  inverseBlocks(sizes: readonly number[]): Float64Array[] {
    const n = this.order;
    const L = this.#factor;
    const X = new Pairs(n * n); // column j at j n
    for (let j = 0; j < n; j += 1) {
      X.hi[j * n + j] = 1;
      for (let i = j; i < n; i += 1) {
        const from = Math.max(this.#first[i]!, j);
        X.set(j * n + i, divide(lessDot(X.get(j * n + i), L, this.#base[i]! + from, X, j * n + from, i - from), this.#diagonal(i)));
      }
    }
    let first = 0;
    return sizes.map((d) => {
      const block = Float64Array.from({ length: d * d }, (_, k) => {
        const [a, b] = [first + (k % d), first + Math.floor(k / d)];
        const from = Math.max(a, b);
        return -lessDot(zero, X, a * n + from, X, b * n + from, n - from)[0];
      });
      first += d;
      return block;
    });
  }

  /** The diagonal of the inverse, each entry rounded to double: the recursion of Takahashi, Fagan, Chen (1973) over the envelope,
   *  Z[i, j] = −Σ_k Z[i, k] L[k, j] / L[j, j], Z[j, j] = (1 / L[j, j] − Σ_k Z[k, j] L[k, j]) / L[j, j]. */
  inverseDiagonal(): Float64Array {
    const L = this.#factor;
    const Z = new Pairs(L.hi.length);
    const entry = (i: number, k: number): DoubleDouble => Z.get(i > k ? this.#base[i]! + k : this.#base[k]! + i);
    const below: number[][] = Array.from({ length: this.order }, () => []);
    for (let i = 0; i < this.order; i += 1) for (let j = this.#first[i]!; j < i; j += 1) below[j]!.push(i);
    for (let j = this.order - 1; j >= 0; j -= 1) {
      const rows = below[j]!;
      const pivot = this.#diagonal(j);
      for (const i of rows) {
        let sum = zero;
        for (const k of rows) sum = subtract(sum, multiply(entry(i, k), L.get(this.#base[k]! + j)));
        Z.set(this.#base[i]! + j, divide(sum, pivot));
      }
      let sum = divide([1, 0], pivot);
      for (const k of rows) sum = subtract(sum, multiply(Z.get(this.#base[k]! + j), L.get(this.#base[k]! + j)));
      Z.set(this.#base[j]! + j, divide(sum, pivot));
    }
    return Float64Array.from({ length: this.order }, (_, j) => Z.hi[this.#base[j]! + j]!);
  }

  /** Natural logarithm of the determinant: each pivot's logarithm is good to half a unit in its last place or so, their sum is exact. */
  logDeterminant(): number {
    let sum = zero;
    for (let i = 0; i < this.order; i += 1) {
      const [hi, lo] = this.#diagonal(i);
      sum = add(sum, [2 * Math.log(hi), (2 * lo) / hi]);
    }
    return sum[0];
  }
}
