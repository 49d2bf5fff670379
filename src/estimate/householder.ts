// Dense rows made triangular by Householder reflections, strong rows first, for rows of very different weight.
// Sources: Golub, Van Loan, "Matrix Computations", sections 5.2 and 5.4 (column pivoting); Powell, Reid (1969) and Cox, Higham, "Stability of
// Householder QR factorization for weighted least squares problems" (1998): rows sorted by size and columns pivoted keep each row's error small
// beside that row.

/** What is left of a column below the rows done, beside the whole of it: rounding, so it depends on the columns done. */
const DEPENDENT = 1e-12;

/** Sorts the rows of A (rows × columns, column-major) so that the largest of the first `deciding` entries of each is never smaller than
 *  that of the next. */
export function sortRows(a: Float64Array, rows: number, deciding: number): void {
  const columns = a.length / rows;
  const largest = new Float64Array(rows);
  for (let c = 0; c < deciding; c += 1) for (let i = 0; i < rows; i += 1) largest[i] = Math.max(largest[i]!, Math.abs(a[c * rows + i]!));
  if (largest.every((size, i) => i === 0 || size <= largest[i - 1]!)) return;
  const order = [...largest.keys()].sort((i, j) => largest[j]! - largest[i]!);
  const column = new Float64Array(rows);
  for (let c = 0; c < columns; c += 1) {
    for (let i = 0; i < rows; i += 1) column[i] = a[c * rows + order[i]!]!;
    a.set(column, c * rows);
  }
}

/**
 * Reflects the rows from `top` on in place, all columns alike, until the columns [from, to) are zero below as many rows as they have rank.
 * @param a rows × columns, column-major. Columns in [from, to) are taken longest first but stay where they are, so what they become is
 *   triangular in the order taken.
 * @returns their rank below `top`.
 * Cost: 4 rows (to − from) columns flops at most.
 */
export function eliminateColumns(a: Float64Array, rows: number, top: number, from: number, to: number): number {
  const columns = a.length / rows;
  const waiting = new Set<number>();
  const whole = new Float64Array(to);
  for (let c = from; c < to; c += 1) {
    waiting.add(c);
    whole[c] = tail(a, c * rows, top, rows);
  }
  let row = top;
  for (; row < rows; row += 1) {
    let pivot = -1;
    let longest = 0;
    for (const c of waiting) {
      const length = tail(a, c * rows, row, rows);
      if (length > DEPENDENT * whole[c]! && length > longest) [pivot, longest] = [c, length];
    }
    if (pivot < 0) break;
    waiting.delete(pivot);
    reflect(a, rows, columns, row, pivot, longest);
  }
  for (const c of waiting) a.fill(0, c * rows + row, (c + 1) * rows);
  return row - top;
}

function tail(a: Float64Array, at: number, from: number, to: number): number {
  let sum = 0;
  for (let i = from; i < to; i += 1) sum += a[at + i]! * a[at + i]!;
  return Math.sqrt(sum);
}

/** One reflection that turns the pivot column's part from `row` on into a single entry. */
function reflect(a: Float64Array, rows: number, columns: number, row: number, pivot: number, length: number): void {
  const at = pivot * rows;
  const head = a[at + row]!;
  const alpha = head > 0 ? -length : length;
  const v = a.slice(at + row, at + rows);
  v[0] = head - alpha;
  const scale = 1 / (alpha * v[0]!); // −2 ÷ vᵀv
  for (let c = 0; c < columns; c += 1) {
    if (c === pivot) continue;
    let sum = 0;
    for (let i = 0; i < v.length; i += 1) sum += v[i]! * a[c * rows + row + i]!;
    if (sum === 0) continue;
    sum *= scale;
    for (let i = 0; i < v.length; i += 1) a[c * rows + row + i]! += sum * v[i]!;
  }
  a[at + row] = alpha;
  a.fill(0, at + row + 1, at + rows);
}
