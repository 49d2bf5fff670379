// States left out with all that the measurements say of the others kept: rows on their neighbours (the Schur complement in square-root form).
import { eliminateColumns, sortRows } from "./householder.js";
import type { WhitenedRows } from "./whitened.js";

export interface Absorbed {
  /** What is known of the other states, at most as many rows in each as its states have unknowns. */
  readonly rows: WhitenedRows[];
  /** Rows that fell away since others say the same, and the sum of squares of what they differed by: degrees of freedom and residuals that
   *  the variance factor goes on counting. */
  readonly redundancy: number;
  readonly squares: number;
}

/**
 * Eliminates `states`, one after another, from `rows`: all rows that read any of them.
 * A state or a direction of it that the rows do not determine takes nothing along.
 * Cost: O(neighbourhood³) a state; states with few neighbours go first.
 * Source: Golub, Van Loan, "Matrix Computations", section 5.2; the square-root form of marginalization is that of Bierman (1977), ch. 4.
 */
export function absorb(states: readonly number[], rows: readonly WhitenedRows[], dimensionOf: (state: number) => number): Absorbed {
  const pool = new Map<number, Set<WhitenedRows>>(states.map((state) => [state, new Set()]));
  const rest = new Set<WhitenedRows>();
  const file = (r: WhitenedRows): void => {
    const reading = r.states.filter((state) => pool.has(state));
    for (const state of reading) pool.get(state)!.add(r);
    if (reading.length === 0) rest.add(r);
  };
  rows.forEach(file);
  let redundancy = 0;
  let squares = 0;
  const neighbours = (state: number): number => new Set([...pool.get(state)!].flatMap((r) => r.states)).size;
  for (const { state } of states.map((s) => ({ state: s, count: neighbours(s) })).sort((a, b) => a.count - b.count)) {
    const reading = [...pool.get(state)!];
    for (const r of reading) for (const s of r.states) pool.get(s)?.delete(r);
    pool.delete(state);
    const left = eliminate(state, reading, dimensionOf);
    redundancy += left.redundancy;
    squares += left.squares;
    if (left.rows) file(left.rows);
  }
  return { rows: [...rest], redundancy, squares };
}

/** One state out of the rows that read it. */
function eliminate(
  state: number,
  reading: readonly WhitenedRows[],
  dimensionOf: (state: number) => number,
): { rows: WhitenedRows | undefined; redundancy: number; squares: number } {
  const others = [...new Set(reading.flatMap((r) => r.states))].filter((s) => s !== state);
  const d = dimensionOf(state);
  const first = new Map([[state, 0]]);
  let columns = d;
  for (const s of others) {
    first.set(s, columns);
    columns += dimensionOf(s);
  }
  const m = reading.reduce((sum, r) => sum + r.rows, 0);
  const a = new Float64Array(m * (columns + 1)); // the residual last
  let top = 0;
  for (const { states, blocks, rows, residual } of reading) {
    for (const [k, s] of states.entries()) {
      const block = blocks[k]!;
      for (let u = 0; u * rows < block.length; u += 1) a.set(block.subarray(u * rows, (u + 1) * rows), (first.get(s)! + u) * m + top);
    }
    a.set(residual, columns * m + top);
    top += rows;
  }
  sortRows(a, m, columns);
  const own = eliminateColumns(a, m, 0, 0, d);
  const kept = eliminateColumns(a, m, own, d, columns);
  let squares = 0;
  for (let i = own + kept; i < m; i += 1) squares += a[columns * m + i]! ** 2;
  const part = (column: number): Float64Array => a.subarray(column * m + own, column * m + own + kept);
  const rows = kept > 0 ? rowsOf(others, dimensionOf, kept, (s, u) => part(first.get(s)! + u), part(columns)) : undefined;
  return { rows, redundancy: m - own - kept, squares };
}

function rowsOf(
  states: readonly number[],
  dimensionOf: (state: number) => number,
  rows: number,
  column: (state: number, unknown: number) => Float64Array,
  residual: Float64Array,
): WhitenedRows {
  const blocks = states.map((state) => {
    const block = new Float64Array(rows * dimensionOf(state));
    for (let u = 0; u < dimensionOf(state); u += 1) block.set(column(state, u), u * rows);
    return block;
  });
  return { states, rows, blocks, residual: residual.slice() };
}
