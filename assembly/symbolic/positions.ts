/** Where the entries of A go in the panels, found once for all values that share the pattern.
 *  Entries of one column of A whose rows are one state's follow one another in a panel too, down a column or along a row, so a
 *  record of three numbers serves the whole run. */
import { allocateArray } from "../memory/heap";
import { addI32, i32At, setI32 } from "../memory/access";
import { Symbolic } from "./symbolic";

/** Length of the run of A's column that starts at p: rows that follow one another in A and in elimination order and belong to one
 *  state (blockOf i32[n], caller's numbering). */
// @ts-ignore: decorator
@inline
function runLength(p: i32, end: i32, rowIndex: usize, place: usize, blockOf: usize): i32 {
  const i = i32At(rowIndex, p), block = i32At(blockOf, i), at = i32At(place, i);
  let length = 1;
  while (p + length < end) {
    const r = i32At(rowIndex, p + length);
    if (i32At(blockOf, r) != block || i32At(place, r) != at + length) break;
    ++length;
  }
  return length;
}

/** Counts the records of A's columns [from, to) into recordStart (i32[supernodes + 1], zero on the first call), one place late. */
export function countRecords(s: Symbolic, columnStart: usize, rowIndex: usize, blockOf: usize, from: i32, to: i32): void {
  const place = s.place, supernodeOf = s.supernodeOf, counts = s.recordStart + 4;
  for (let j = from; j < to; ++j) {
    const column = i32At(place, j);
    for (let p = i32At(columnStart, j), end = i32At(columnStart, j + 1); p < end;) {
      const row = i32At(place, i32At(rowIndex, p));
      addI32(counts, i32At(supernodeOf, row < column ? row : column), 1);
      p += runLength(p, end, rowIndex, place, blockOf);
    }
  }
}

/** Turns the counts into starts and makes room; `fill` i32[supernodes] gets a copy of them. False when memory runs out. */
export function makeRecordRoom(s: Symbolic, fill: usize): bool {
  for (let t = 0; t < s.supernodes; ++t) {
    addI32(s.recordStart, t + 1, i32At(s.recordStart, t));
    setI32(fill, t, i32At(s.recordStart, t));
  }
  s.records = allocateArray(3 * <f64>i32At(s.recordStart, s.supernodes) + 1, 2);
  return s.records != 0;
}

/** Writes the records of A's columns [from, to): first index into values, row and column in elimination order packed into the place
 *  of the panel entry (the column in `columns` i32[records]), signed length. */
export function writeRecords(
  s: Symbolic, columnStart: usize, rowIndex: usize, blockOf: usize, fill: usize, columns: usize, from: i32, to: i32,
): void {
  const place = s.place, supernodeOf = s.supernodeOf, records = s.records;
  for (let j = from; j < to; ++j) {
    const column = i32At(place, j);
    for (let p = i32At(columnStart, j), end = i32At(columnStart, j + 1); p < end;) {
      const row = i32At(place, i32At(rowIndex, p)), length = runLength(p, end, rowIndex, place, blockOf);
      const along = row < column;
      const t = i32At(supernodeOf, along ? row : column), at = i32At(fill, t);
      setI32(fill, t, at + 1);
      setI32(records, 3 * at, p);
      setI32(records, 3 * at + 1, along ? column : row);
      setI32(records, 3 * at + 2, along ? -length : length);
      setI32(columns, at, along ? row : column);
      p += length;
    }
  }
}

/** Replaces the rows in the records of supernode t by entries of its panel. `local` i32[n] is workspace without requirement. */
export function resolveRecords(s: Symbolic, t: i32, columns: usize, local: usize): void {
  const first = i32At(s.first, t), end = i32At(s.first, t + 1), lead = i32At(s.lead, t), records = s.records;
  for (let q = i32At(s.rowStart, t), last = i32At(s.rowStart, t + 1), k = end - first - q; q < last; ++q) setI32(local, i32At(s.rows, q), q + k);
  for (let at = i32At(s.recordStart, t), last = i32At(s.recordStart, t + 1); at < last; ++at) {
    const row = i32At(records, 3 * at + 1), column = i32At(columns, at);
    setI32(records, 3 * at + 1, (column - first) * lead + (row < end ? row - first : i32At(local, row)));
  }
}

/** Adds A's values to the zeroed panel of supernode t. */
export function scatterValues(s: Symbolic, t: i32, values: usize, panel: usize): void {
  const stride = <usize>i32At(s.lead, t) << 3, records = s.records;
  for (let at = i32At(s.recordStart, t), last = i32At(s.recordStart, t + 1); at < last; ++at) {
    const record = records + <usize>(12 * at);
    let from = values + (<usize>load<i32>(record) << 3), into = panel + (<usize>load<i32>(record, 4) << 3);
    const length = load<i32>(record, 8);
    if (length > 0) for (let k = 0; k < length; ++k, from += 8, into += 8) store<f64>(into, load<f64>(from));
    else for (let k = 0; k > length; --k, from += 8, into += stride) store<f64>(into, load<f64>(from));
  }
}
