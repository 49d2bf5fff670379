// Residuals of least squares in double-double, so that what a step of refinement starts from is right.
// Sources: error-free sum: Knuth, The Art of Computer Programming 2, section 4.2.2; error-free product: Dekker (1971), "A floating-point technique for
// extending the available precision", Numer. Math. 18; refinement: Björck (1967), BIT 7.
import type { WeightedRows } from "./weighted-rows.js";

/** A vector of numbers high + low. */
export interface DoubledVector {
  readonly high: Float64Array;
  readonly low: Float64Array;
}

/** 2²⁷ + 1 cuts a number into two of 26 bits; exact below 2⁹⁹⁶. */
const SPLITTER = 134217729;

/** (high, low)[k] += a · b, without the last bits of low. */
function addProduct({ high, low }: DoubledVector, k: number, a: number, b: number): void {
  const product = a * b;
  const ca = SPLITTER * a;
  const cb = SPLITTER * b;
  const ah = ca - (ca - a);
  const bh = cb - (cb - b);
  const al = a - ah;
  const bl = b - bh;
  const rest = al * bl - (product - ah * bh - al * bh - ah * bl);
  const h = high[k]!;
  const sum = h + product;
  const of = sum - h;
  const error = h - (sum - of) + (product - of) + rest + low[k]!;
  high[k] = sum + error;
  low[k] = error - (high[k]! - sum);
}

/** b − J x, one number a row of J; rows that fell out keep b. */
export function residualOf({ jacobian }: WeightedRows, b: Float64Array, x: Float64Array): DoubledVector {
  const result = { high: b.slice(), low: new Float64Array(b.length) };
  const { columnPointers, rowIndices, values } = jacobian;
  for (const [j, value] of x.entries()) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) addProduct(result, rowIndices[p]!, -values[p]!, value);
  }
  return result;
}

/** Jᵀ W r, summed in double-double and rounded. */
export function transposedProduct({ jacobian, weights }: WeightedRows, r: DoubledVector): Float64Array {
  const { columns, columnPointers, rowIndices, values } = jacobian;
  const weighted = { high: new Float64Array(weights.length), low: new Float64Array(weights.length) };
  for (const [i, weight] of weights.entries()) {
    addProduct(weighted, i, weight, r.high[i]!);
    addProduct(weighted, i, weight, r.low[i]!);
  }
  const result = { high: new Float64Array(columns), low: new Float64Array(columns) };
  for (let j = 0; j < columns; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      addProduct(result, j, values[p]!, weighted.high[rowIndices[p]!]!);
      addProduct(result, j, values[p]!, weighted.low[rowIndices[p]!]!);
    }
  }
  return result.high;
}
