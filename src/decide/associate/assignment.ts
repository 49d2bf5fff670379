// The cheapest one-to-one assignment of rows to columns: shortest augmenting paths with dual variables.
// Sources: H. W. Kuhn, Naval Res. Logist. Q. 2 (1955) 83; R. Jonker, A. Volgenant, Computing 38 (1987) 325; the rectangular form of
// D. F. Crouse, IEEE Trans. Aerosp. Electron. Syst. 52 (2016) 1679.
import { ArgumentError } from "../errors.js";

/**
 * Assigns every row to a column of its own so that the sum of costs is least; Infinity forbids a pair.
 * @param costs row-major, `rows` × `columns`, rows ≤ columns; no NaN, no −Infinity.
 * @returns `columnOf[row]`, and the sum.
 * @throws {ArgumentError} wrong sizes, NaN, or no assignment without a forbidden pair.  Cost O(rows² · columns).
 */
export function cheapestAssignment(costs: Float64Array, rows: number, columns: number): { columnOf: Int32Array; cost: number } {
  if (rows > columns)
    throw new ArgumentError(
      "rows",
      rows,
      `each row needs a column of its own, and there are ${columns}: add columns that stand for "none".`,
    );
  if (costs.length !== rows * columns) throw new ArgumentError("length of costs", costs.length, `give ${rows} × ${columns} costs.`);
  const bad = costs.findIndex((cost) => !(cost > -Infinity));
  if (bad >= 0) throw new ArgumentError(`costs[${bad}]`, costs[bad], "give a number, or Infinity for a pair that must not be.");
  const rowPrice = new Float64Array(rows);
  const columnPrice = new Float64Array(columns);
  const columnOf = new Int32Array(rows).fill(-1);
  const rowOf = new Int32Array(columns).fill(-1);
  const distance = new Float64Array(columns);
  const before = new Int32Array(columns); // the row from which a column is reached
  const scanned = new Uint8Array(columns);
  for (let start = 0; start < rows; ++start) {
    distance.fill(Infinity);
    scanned.fill(0);
    const rowsReached: number[] = [];
    let reached = 0; // length of the shortest path so far
    let sink = -1;
    for (let row = start; sink < 0; ) {
      rowsReached.push(row);
      let nearest = -1;
      for (let j = 0; j < columns; ++j) {
        if (scanned[j]) continue;
        const through = reached + costs[row * columns + j]! - rowPrice[row]! - columnPrice[j]!;
        if (through < distance[j]!) {
          distance[j] = through;
          before[j] = row;
        }
        // of equally near columns a free one ends the path sooner
        if (nearest < 0 || distance[j]! < distance[nearest]! || (distance[j] === distance[nearest] && rowOf[j]! < 0)) nearest = j;
      }
      if (nearest < 0 || distance[nearest] === Infinity)
        throw new ArgumentError(
          "costs",
          `of row ${start}`,
          'no assignment avoids every forbidden pair: allow more pairs, or add columns that stand for "none".',
        );
      reached = distance[nearest]!;
      scanned[nearest] = 1;
      if (rowOf[nearest]! < 0) sink = nearest;
      else row = rowOf[nearest]!;
    }
    // prices that keep every reduced cost at or above zero, and zero along the path
    rowPrice[start]! += reached;
    for (const row of rowsReached) if (row !== start) rowPrice[row]! += reached - distance[columnOf[row]!]!;
    for (let j = 0; j < columns; ++j) if (scanned[j] && j !== sink) columnPrice[j]! -= reached - distance[j]!;
    for (let column = sink, row = -1; row !== start; ) {
      row = before[column]!;
      rowOf[column] = row;
      const released = columnOf[row]!;
      columnOf[row] = column;
      column = released;
    }
  }
  return { columnOf, cost: columnOf.reduce((sum, column, row) => sum + costs[row * columns + column]!, 0) };
}
