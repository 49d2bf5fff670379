// L by columns on its exact pattern, entry by entry: what the published recursion starts from. No supernodes, so no stored zeros that would
// slow the recursion down. Not timed.
// Source: George, Liu, "Computer Solution of Large Sparse Positive Definite Systems" (1981), ch. 5: the pattern of a column is that of the
// matrix and of its children in the elimination tree; numbers column by column, each column updated by those whose next row it is.
import type { Information } from "../families/information.js";
import type { FactorColumns } from "../harness/recursion.js";

/** @param elimination the unknown eliminated k-th. */
export function scalarFactor({ order, columnPointers, rowIndices, values }: Information, elimination: Int32Array): FactorColumns {
  const place = new Int32Array(order);
  for (let k = 0; k < order; k += 1) place[elimination[k]!] = k;
  const { start, row, value } = permuted(order, columnPointers, rowIndices, values, place);
  const pattern = columnsOfFactor(order, start, row);
  return { order, ...pattern, values: numbers(order, start, row, value, pattern) };
}

type Pattern = Pick<FactorColumns, "columnPointers" | "rowIndices">;

/** The lower triangle of the matrix in elimination order, by columns. */
function permuted(order: number, pointers: Int32Array, rows: Int32Array, values: Float64Array, place: Int32Array) {
  const start = new Int32Array(order + 1);
  const eachEntry = (visit: (i: number, j: number, p: number) => void): void => {
    for (let j = 0; j < order; j += 1) {
      for (let p = pointers[j]!; p < pointers[j + 1]!; p += 1) {
        const [a, b] = [place[j]!, place[rows[p]!]!];
        visit(Math.max(a, b), Math.min(a, b), p);
      }
    }
  };
  eachEntry((_i, j) => {
    start[j + 1]! += 1;
  });
  for (let j = 0; j < order; j += 1) start[j + 1]! += start[j]!;
  const fill = start.slice();
  const row = new Int32Array(values.length);
  const value = new Float64Array(values.length);
  eachEntry((i, j, p) => {
    row[fill[j]!] = i;
    value[fill[j]!] = values[p]!;
    fill[j]! += 1;
  });
  return { start, row, value };
}

/** Rows of each column of L, ascending, the diagonal first. */
function columnsOfFactor(order: number, start: Int32Array, row: Int32Array): Pattern {
  const columns: Int32Array[] = [];
  const children: number[][] = Array.from({ length: order }, () => []);
  const mark = new Int32Array(order).fill(-1);
  let entries = 0;
  for (let j = 0; j < order; j += 1) {
    const list = [j];
    mark[j] = j;
    const take = (i: number): void => {
      if (i <= j || mark[i] === j) return;
      mark[i] = j;
      list.push(i);
    };
    for (let p = start[j]!; p < start[j + 1]!; p += 1) take(row[p]!);
    for (const child of children[j]!) columns[child]!.forEach(take);
    const column = Int32Array.from(list).sort();
    columns.push(column);
    entries += column.length;
    if (column.length > 1) children[column[1]!]!.push(j);
  }
  const columnPointers = new Int32Array(order + 1);
  const rowIndices = new Int32Array(entries);
  for (const [j, column] of columns.entries()) {
    rowIndices.set(column, columnPointers[j]!);
    columnPointers[j + 1] = columnPointers[j]! + column.length;
  }
  return { columnPointers, rowIndices };
}

function numbers(
  order: number,
  start: Int32Array,
  row: Int32Array,
  value: Float64Array,
  { columnPointers, rowIndices }: Pattern,
): Float64Array {
  const l = new Float64Array(rowIndices.length);
  const work = new Float64Array(order);
  /** The columns whose next row is j, as a list: its first one, and the one after each. */
  const head = new Int32Array(order).fill(-1);
  const following = new Int32Array(order);
  const next = columnPointers.slice(0, order);
  const wait = (k: number): void => {
    if (next[k]! >= columnPointers[k + 1]!) return;
    const at = rowIndices[next[k]!]!;
    following[k] = head[at]!;
    head[at] = k;
  };
  for (let j = 0; j < order; j += 1) {
    for (let p = start[j]!; p < start[j + 1]!; p += 1) work[row[p]!] = value[p]!;
    for (let k = head[j]!; k >= 0; ) {
      const after = following[k]!;
      const from = next[k]!;
      const factor = l[from]!;
      for (let p = from, end = columnPointers[k + 1]!; p < end; p += 1) work[rowIndices[p]!]! -= factor * l[p]!;
      next[k] = from + 1;
      wait(k);
      k = after;
    }
    const pivot = Math.sqrt(work[j]!);
    for (let p = columnPointers[j]!, end = columnPointers[j + 1]!; p < end; p += 1) {
      l[p] = p === columnPointers[j]! ? pivot : work[rowIndices[p]!]! / pivot;
      work[rowIndices[p]!] = 0;
    }
    next[j]! += 1;
    wait(j);
  }
  return l;
}
