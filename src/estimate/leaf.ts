// Orthogonal rotation of rows that read a new state: the first rows then define it given older states, the rest read older states alone.
import { sortRows } from "./householder.js";
import type { WhitenedRows } from "./whitened.js";

/** Rows of a new state rotated: R x + Σ G_p x_p = z. */
export interface Leaf {
  readonly state: number;
  readonly dimension: number;
  readonly parents: readonly number[];
  /** L = Rᵀ (d × d, lower, column-major), then G of each parent (d × its dimension, column-major). */
  readonly numbers: Float64Array;
  /** Squared length of each column that was rotated: the state's, then each parent's. */
  readonly squares: Float64Array;
  readonly z: Float64Array;
}

/** A column of R is taken as dependent on those before it when this share of its length, or less, is left over. Householder
 *  reflections keep errors near ε times the length, and a definition that weak is better left to a factor of the whole. */
const RANK_TOLERANCE = 1e-9;

/**
 * Eliminates `state` from all of `pool` that reads it.
 * @returns the leaf, and the rest of those rows (on other states alone; empty when nothing is left), or undefined when the rows do not
 *   determine the state given the others.
 * Cost: 2 m d (all columns) flops. Source: Golub, Van Loan, "Matrix Computations", section 5.2 (Householder).
 */
function splitLeaf(
  state: number,
  dimension: number,
  pool: readonly WhitenedRows[],
  dimensionOf: (state: number) => number,
): { leaf: Leaf; rest: WhitenedRows | undefined } | undefined {
  const d = dimension;
  const states: number[] = [];
  for (const rows of pool) for (const s of rows.states) if (s !== state && !states.includes(s)) states.push(s);
  const { a, m, columns, columnOf } = gather([state, ...states], pool, dimensionOf);
  const squares = new Float64Array(columns);
  for (let c = 0, k = 0; c < columns; c += 1) for (let end = k + m; k < end; k += 1) squares[c]! += a[k]! * a[k]!;
  if (m < d || !reflect(a, m, d, columns + 1, RANK_TOLERANCE)) return undefined;

  const numbers = new Float64Array(d * columns);
  for (let j = 0; j < d; j += 1) {
    const sign = a[j * m + j]! < 0 ? -1 : 1; // rows turned so that the diagonal is positive
    for (let c = j; c < d; c += 1) numbers[j * d + c] = sign * a[c * m + j]!;
    for (let c = d; c < columns; c += 1) numbers[c * d + j] = sign * a[c * m + j]!;
    if (sign < 0) a[columns * m + j] = -a[columns * m + j]!;
  }
  const z = a.slice(columns * m, columns * m + d);
  const left = m - d;
  let rest: WhitenedRows | undefined;
  if (left > 0 && states.length > 0) {
    const blocks = states.map((s) => {
      const first = columnOf.get(s)!;
      const size = dimensionOf(s);
      const block = new Float64Array(left * size);
      for (let u = 0; u < size; u += 1) block.set(a.subarray((first + u) * m + d, (first + u + 1) * m), u * left);
      return block;
    });
    rest = { states, rows: left, blocks, residual: a.slice(columns * m + d, (columns + 1) * m) };
  }
  return { leaf: { state, dimension: d, parents: states, numbers, squares, z }, rest };
}

/** All rows of `pool` as one column-major matrix m × (columns + 1), states side by side as listed, the residual last. */
function gather(
  states: readonly number[],
  pool: readonly WhitenedRows[],
  dimensionOf: (state: number) => number,
): { a: Float64Array; m: number; columns: number; columnOf: Map<number, number> } {
  const columnOf = new Map<number, number>();
  let columns = 0;
  for (const s of states) {
    columnOf.set(s, columns);
    columns += dimensionOf(s);
  }
  const m = pool.reduce((sum, { rows }) => sum + rows, 0);
  const a = new Float64Array(m * (columns + 1));
  let top = 0;
  for (const { states: of, rows, blocks, residual } of pool) {
    for (const [k, s] of of.entries()) {
      const first = columnOf.get(s)!;
      const block = blocks[k]!;
      for (let u = 0; u < block.length / rows; u += 1)
        for (let q = 0; q < rows; q += 1) a[(first + u) * m + top + q] = block[u * rows + q]!;
    }
    a.set(residual, columns * m + top);
    top += rows;
  }
  sortRows(a, m, columns); // so that weak rows beside strong ones keep their digits
  return { a, m, columns, columnOf };
}

/** Householder reflections that make the first d of `columns` columns upper triangular; false when one of them leaves no more than
 *  `tolerance` of its length to those before it. A column of zeros is passed over when the tolerance is 0. */
function reflect(a: Float64Array, m: number, d: number, columns: number, tolerance: number): boolean {
  for (let j = 0; j < d; j += 1) {
    let whole = 0;
    let tail = 0;
    for (let i = 0; i < m; i += 1) {
      const square = a[j * m + i]! ** 2;
      whole += square;
      if (i >= j) tail += square;
    }
    const length = Math.sqrt(tail);
    if (!(length > tolerance * Math.sqrt(whole)) && tolerance > 0) return false;
    if (length === 0) continue;
    if (j === m - 1) continue; // one row is left: it is triangular already
    const head = a[j * m + j]!;
    const alpha = head > 0 ? -length : length;
    const v0 = head - alpha;
    const scale = 1 / (alpha * v0); // −2 ÷ vᵀv
    for (let c = j + 1; c < columns; c += 1) {
      let sum = v0 * a[c * m + j]!;
      for (let i = j + 1; i < m; i += 1) sum += a[j * m + i]! * a[c * m + i]!;
      sum *= scale;
      a[c * m + j]! += sum * v0;
      for (let i = j + 1; i < m; i += 1) a[c * m + i]! += sum * a[j * m + i]!;
    }
    a[j * m + j] = alpha;
    for (let i = j + 1; i < m; i += 1) a[j * m + i] = 0;
  }
  return true;
}

/** A measurement that reads the new state and one other may define it alone when its pivots are at least this share of those of all rows
 *  together: what the others add then stays below a thousandfold of information, which costs the ledger no more than three digits. */
const ALONE_SHARE = 0.03;

/**
 * The leaf of a state by one measurement with one other state, where there is one that is strong enough beside `all`, the leaf by all rows
 * that read it: a leaf with one parent is the cheapest to follow, and the other rows keep their measurement.
 */
function aloneLeaf(
  state: number,
  reading: readonly WhitenedRows[],
  all: Leaf,
  dimensionOf: (state: number) => number,
): { leaf: Leaf; rest: WhitenedRows[] } | undefined {
  const d = dimensionOf(state);
  if (reading.length < 2) return undefined;
  for (const rows of reading) {
    if (rows.states.length !== 2 || rows.rows < d) continue;
    const alone = splitLeaf(state, d, [rows], dimensionOf);
    if (!alone) continue;
    let share = 1;
    for (let j = 0; j < d; j += 1) share = Math.min(share, alone.leaf.numbers[j * (d + 1)]! / all.numbers[j * (d + 1)]!);
    if (share < ALONE_SHARE) continue;
    return { leaf: alone.leaf, rest: [...reading.filter((r) => r !== rows), ...(alone.rest ? [alone.rest] : [])] };
  }
  return undefined;
}

/**
 * Eliminates all `states` (those new in a batch) from `rows`, in an order that the rows allow.
 * @returns leaves in the order in which they can be added (each after its parents) and the rows left on older states, or undefined when
 *   some state is not determined one by one.
 */
export function splitLeaves(
  states: readonly number[],
  rows: readonly WhitenedRows[],
  dimensionOf: (state: number) => number,
): { leaves: Leaf[]; rest: WhitenedRows[] } | undefined {
  const leaves: Leaf[] = [];
  const settled: WhitenedRows[] = [];
  let pool = [...rows];
  const waiting = new Set(states);
  while (waiting.size > 0) {
    let found = false;
    for (const state of [...waiting].reverse()) {
      const reading = pool.filter((r) => r.states.includes(state));
      // Rows on a state that is still to be eliminated must not be left on one that is eliminated before it.
      const isLast = reading.every((r) => r.states.every((s) => s === state || !waiting.has(s)));
      const all = splitLeaf(state, dimensionOf(state), reading, dimensionOf);
      if (!all) continue;
      const alone = isLast ? aloneLeaf(state, reading, all.leaf, dimensionOf) : undefined;
      leaves.push((alone ?? all).leaf);
      pool = pool.filter((r) => !r.states.includes(state));
      if (alone) settled.push(...alone.rest);
      else if (all.rest) pool.push(all.rest);
      waiting.delete(state);
      found = true;
      break;
    }
    if (!found) return undefined;
  }
  return { leaves: leaves.reverse(), rest: [...settled, ...pool] };
}
