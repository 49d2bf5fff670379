// Random sparse positive definite matrices for property tests, built so that their smallest eigenvalue is known from below.
import fc from "fast-check";
import { SymmetricMatrix } from "../../src/index.js";

/** Every way to order that needs no data: results must not depend on it beyond rounding. */
export const orderings = ["automatic", "minimum-degree", "nested-dissection", "natural"] as const;

export interface Triplets {
  readonly order: number;
  readonly rows: number[];
  readonly columns: number[];
  readonly values: number[];
  /** No eigenvalue is below this. */
  readonly smallestEigenvalue: number;
}

/** Σ over random pairs of w (e_a + s e_b)(e_a + s e_b)ᵀ with |s| ≤ 2, plus a diagonal of at least `ridge`: any pattern, signs mixed.
 *  Entries of the lower triangle in random order, with duplicates. */
export const triplets = (largestOrder: number, { ridge = 0.1 } = {}): fc.Arbitrary<Triplets> =>
  fc.integer({ min: 1, max: largestOrder }).chain((order) => {
    const unknown = fc.nat(order - 1);
    const pair = fc.record({
      a: unknown,
      b: unknown,
      s: fc.double({ min: -2, max: 2, noNaN: true }),
      w: fc.double({ min: 0.01, max: 100, noNaN: true }),
    });
    return fc
      .record({
        pairs: fc.array(pair, { maxLength: 3 * order }),
        diagonal: fc.array(fc.double({ min: ridge, max: 10, noNaN: true }), { minLength: order, maxLength: order }),
        shuffle: fc.infiniteStream(fc.nat()),
      })
      .map(({ pairs, diagonal, shuffle }) => {
        const entries = diagonal.map((v, k) => ({ i: k, j: k, v }));
        for (const { a, b, s, w } of pairs) {
          if (a === b) continue;
          entries.push({ i: a, j: a, v: w }, { i: Math.max(a, b), j: Math.min(a, b), v: w * s }, { i: b, j: b, v: w * s * s });
        }
        for (let k = entries.length - 1; k > 0; k -= 1) {
          const other = (shuffle.next().value as number) % (k + 1);
          [entries[k], entries[other]] = [entries[other]!, entries[k]!];
        }
        return {
          order,
          rows: entries.map(({ i }) => i),
          columns: entries.map(({ j }) => j),
          values: entries.map(({ v }) => v),
          smallestEigenvalue: ridge,
        };
      });
  });

export const matrixOf = ({ order, rows, columns, values }: Triplets): SymmetricMatrix =>
  SymmetricMatrix.fromTriplets(order, rows, columns, values);

/** Largest sum of |entries| of a column: the 1-norm, and the ∞-norm as well. */
export function norm({ order, columnPointers, rowIndices, values }: SymmetricMatrix): number {
  const sums = new Float64Array(order);
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const i = rowIndices[p]!;
      sums[j]! += Math.abs(values[p]!);
      if (i !== j) sums[i]! += Math.abs(values[p]!);
    }
  }
  return sums.reduce((largest, v) => Math.max(largest, v), 0);
}

/** A x, by the lower triangle. */
export function times({ order, columnPointers, rowIndices, values }: SymmetricMatrix, x: ArrayLike<number>): Float64Array {
  const result = new Float64Array(order);
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const i = rowIndices[p]!;
      result[i]! += values[p]! * x[j]!;
      if (i !== j) result[j]! += values[p]! * x[i]!;
    }
  }
  return result;
}
