// What no row of a system sees: an orthonormal basis of the motions that change none of the rows, or next to none.
import { NotPositiveDefiniteError } from "../errors.js";
import type { CholeskyFactor } from "../matrix/cholesky-factor.js";
import { factorize } from "../matrix/factorize.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import { assembleInformation, type Information } from "./information.js";
import { norm, orthogonalize, orthonormalize } from "./orthogonal.js";
import type { WhitenedRows } from "./whitened.js";

/** Added to the unit diagonal of the scaled information matrix: far above rounding (8 ε is the factor's pivot floor), far below what rows hold. */
const SHIFT = 1e-11;
/** ‖A y‖ for unit y and columns of unit length. A free motion comes out near ε ÷ √SHIFT = 7e-11 (backward errors of the solves); what
 *  holds a motion by less than this is lost in the information matrix, where it stands squared, below 1e-17. */
const FREE = 3e-9;
/** Below this, squared, pivots of the information matrix come near rounding. */
const WEAK = 1e-6;
/** Each step shrinks what the rows see by SHIFT ÷ (its eigenvalue + SHIFT). */
const STEPS = 4;
const FIRST_BLOCK = 10;
const LARGEST_BLOCK = 80;

/** A basis in scaled unknowns y = x ÷ scale, each column of unit length. */
export interface NullSpace {
  readonly order: number;
  readonly dimension: number;
  /** order × dimension, column-major. */
  readonly basis: Float64Array;
  /** x = scale · y, 1 ÷ √(diagonal entry of the information matrix). */
  readonly scale: Float64Array;
  /** The rows do hold these motions, but so weakly that an information matrix in f64 does not. */
  readonly isWeak: boolean;
  /** There may be more of them. */
  readonly isPartial: boolean;
}

/** A X for columns X of unknowns (order × columns, column-major): rows × columns, column-major. */
export function timesRows(
  rows: readonly WhitenedRows[],
  firstOf: (state: number) => number,
  x: Float64Array,
  order: number,
  columns: number,
): Float64Array {
  const m = rows.reduce((sum, r) => sum + r.rows, 0);
  const out = new Float64Array(m * columns);
  for (let c = 0; c < columns; c += 1) {
    let at = c * m;
    for (const r of rows) {
      for (let k = 0; k < r.states.length; k += 1) {
        const first = firstOf(r.states[k]!);
        const block = r.blocks[k]!;
        for (let u = 0, p = 0; p < block.length; u += 1) {
          const value = x[c * order + first + u]!;
          for (let q = 0; q < r.rows; q += 1, p += 1) out[at + q]! += block[p]! * value;
        }
      }
      at += r.rows;
    }
  }
  return out;
}

/**
 * The null space of the rows on `states`, which must read no other state.
 * Method: inverse iteration with a block of vectors on the information matrix, scaled to a unit diagonal and shifted, then the singular
 * values of the rows on the space found, which tell a free motion from a weak one where the information matrix no longer does.
 * Cost: one factorization, and STEPS solves of ten columns (more when ten motions are not all).
 * Source: Golub, Van Loan, "Matrix Computations", sections 8.2.4 (orthogonal iteration) and 8.6.3.
 */
export function nullSpace(states: readonly number[], dimensionOf: (state: number) => number, rows: readonly WhitenedRows[]): NullSpace {
  const place = new Map(states.map((state, k) => [state, k]));
  const sizes = Int32Array.from(states, dimensionOf);
  const first = new Map<number, number>();
  let order = 0;
  for (const state of states) {
    first.set(state, order);
    order += dimensionOf(state);
  }
  const information = assembleInformation(sizes, (state) => place.get(state)!, rows);
  const scale = scaleOf(information);
  const factor = shiftedFactor(information, scale);
  try {
    for (let block = Math.min(FIRST_BLOCK, order); ; block = Math.min(2 * block, order)) {
      const y = startingBlock(order, block);
      for (let step = 0; step < STEPS; step += 1) {
        orthonormalize(y, block);
        y.set(factor.solve(y, block));
      }
      const independent = orthonormalize(y, block);
      const x = y.map((value, k) => value * scale[k % order]!);
      const seen = orthogonalize(
        timesRows(rows, (state) => first.get(state)!, x, order, block),
        y,
        block,
      );
      const isReal = (column: number): boolean => norm(y, column * order, order) > 0.5; // dependent ones were set to zero
      const below = (threshold: number): number[] => [...seen.keys()].filter((k) => seen[k]! <= threshold && isReal(k));
      const free = below(FREE);
      const isWeak = free.length === 0;
      const chosen = isWeak ? below(WEAK) : free;
      if (chosen.length === independent && block < Math.min(order, LARGEST_BLOCK)) continue;
      const basis = new Float64Array(order * chosen.length);
      for (const [k, column] of chosen.entries()) basis.set(y.subarray(column * order, (column + 1) * order), k * order);
      return { order, dimension: chosen.length, basis, scale, isWeak, isPartial: chosen.length === independent && block < order };
    }
  } finally {
    factor.dispose();
  }
}

/** 1 ÷ √ of the diagonal; 1 where no row reads the unknown. */
function scaleOf({ order, columnPointers, values }: Information): Float64Array {
  return Float64Array.from({ length: order }, (_, j) => {
    const diagonal = values[columnPointers[j]!]!;
    return diagonal > 0 ? 1 / Math.sqrt(diagonal) : 1;
  });
}

/** The factor of D Λ D + shift · I, D = diag(scale). The shift grows until rounding lets the factor through. */
function shiftedFactor({ order, columnPointers, rowIndices, values, blockSizes }: Information, scale: Float64Array): CholeskyFactor {
  for (let shift = SHIFT; ; shift *= 10) {
    const shifted = new Float64Array(values.length);
    for (let j = 0; j < order; j += 1)
      for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1)
        shifted[p] = values[p]! * scale[rowIndices[p]!]! * scale[j]! + (rowIndices[p] === j ? shift : 0);
    try {
      return factorize(SymmetricMatrix.adopt({ order, columnPointers, rowIndices, values: shifted }), { blockSizes });
    } catch (error) {
      if (!(error instanceof NotPositiveDefiniteError) || shift > 1e-3) throw error;
    }
  }
}

/** Numbers without a pattern, the same every time: the multiplicative generator of Park, Miller (1988). */
function startingBlock(order: number, columns: number): Float64Array {
  let seed = 1;
  return Float64Array.from({ length: order * columns }, () => {
    seed = (seed * 48271) % 2147483647;
    return seed / 1073741823.5 - 1;
  });
}
