// How much of each measurement the others control.
import { factorize } from "../matrix/factorize.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import type { Information } from "./information.js";
import type { WhitenedRows } from "./whitened.js";

/**
 * Redundancy of each of `rows`: m − tr(J Σ Jᵀ R⁻¹), from 0 (nothing else controls it) to m. Over all measurements they add up to the
 * degrees of freedom.
 * @param place the number of a state in the information matrix, which all of `rows` are part of.
 * Cost: one factor and one selected inverse for all together.
 * Source: Baarda (1968), "A testing procedure for use in geodetic networks"; the sum: tr(I − H) of a projection.
 */
export function allRedundancies(information: Information, place: (state: number) => number, rows: readonly WhitenedRows[]): Float64Array {
  const { order, columnPointers, rowIndices, values, blockSizes } = information;
  const factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }), { blockSizes });
  try {
    const inverse = factor.selectedInverse({ pattern: "matrix" });
    const first = new Int32Array(blockSizes.length);
    for (let s = 1; s < first.length; s += 1) first[s] = first[s - 1]! + blockSizes[s - 1]!;
    const entry = (i: number, j: number): number => find(inverse, Math.max(i, j), Math.min(i, j));
    return Float64Array.from(rows, ({ states, blocks, rows: m }) => {
      let trace = 0;
      for (const [a, stateA] of states.entries()) {
        const fa = first[place(stateA)]!;
        for (const [b, stateB] of states.entries()) {
          const fb = first[place(stateB)]!;
          for (let u = 0; u < blocks[a]!.length / m; u += 1)
            for (let v = 0; v < blocks[b]!.length / m; v += 1) {
              let product = 0;
              for (let q = 0; q < m; q += 1) product += blocks[a]![u * m + q]! * blocks[b]![v * m + q]!;
              if (product !== 0) trace += product * entry(fa + u, fb + v);
            }
        }
      }
      return m - trace;
    });
  } finally {
    factor.dispose();
  }
}

/** Entry (i, j), i ≥ j, of a matrix whose pattern has it: rows ascend in each column. */
function find({ columnPointers, rowIndices, values }: SymmetricMatrix, i: number, j: number): number {
  let low = columnPointers[j]!;
  let high = columnPointers[j + 1]! - 1;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (rowIndices[middle]! < i) low = middle + 1;
    else high = middle;
  }
  return values[low]!;
}
