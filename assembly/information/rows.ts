/** The rows of measurements one by one, as the orthogonal elimination takes them: of each row the unknowns that it reads, their numbers, and
 *  its residual, from the blocks that an assembly has summed up. A long call in slices. Entries that are zero are left out, so that a row
 *  goes into the tree no earlier than it has to, and so are rows of zeros, which say nothing about any unknown. */
import { allocateArray, release } from "../memory/heap";
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { Assembly } from "./assemble";

/** Budget units (about 1 ns each) for one number. They set where slices end, never a result. */
const UNITS_NUMBER = 2.0;

@unmanaged
export class RowList {
  /** Its states, measurements and numbers. */
  assembly: Assembly;
  /** The measurement at hand, where its numbers begin, and the rows and entries written before it. */
  at: i32;
  next: usize;
  rows: i32;
  entries: i32;
  /** i32[rows + 1], i32[entries] (unknowns, in the caller's numbering), f64[entries], f64[rows]. */
  rowStart: usize;
  column: usize;
  values: usize;
  right: usize;
}

/** Starts on the measurements of an assembly that is complete; it and its numbers must stay until the list is released. Null when memory
 *  runs out. */
export function rowListBegin(assembly: Assembly): RowList | null {
  const address = allocateArray(1, 6);
  if (!address) return null;
  assert(offsetof<RowList>() <= 64);
  memory.fill(address, 0, 64);
  const list = changetype<RowList>(address);
  list.assembly = assembly;
  list.next = assembly.numbers;
  let rows: f64 = 0, entries: f64 = 0;
  for (let k = 0; k < assembly.measurements; ++k) {
    const m = <f64>i32At(assembly.rows, k);
    rows += m;
    for (let a = i32At(assembly.readStart, k), to = i32At(assembly.readStart, k + 1); a < to; ++a)
      entries += m * <f64>i32At(assembly.sizes, i32At(assembly.reads, a));
  }
  if (entries > 2e9) { release(address); return null; }
  list.rowStart = allocateArray(rows + 1, 2);
  list.column = allocateArray(entries, 2);
  list.values = allocateArray(entries, 3);
  list.right = allocateArray(rows, 3);
  if (!list.rowStart || !list.column || !list.values || !list.right) { rowListRelease(list); return null; }
  setI32(list.rowStart, 0, 0);
  return list;
}

export function rowListRelease(list: RowList): void {
  release(list.rowStart);
  release(list.column);
  release(list.values);
  release(list.right);
  release(changetype<usize>(list));
}

/** Does about `budget` units of work. OK when all rows are written, or RUNNING. */
export function rowListAdvance(list: RowList, budget: f64): i32 {
  const job = list.assembly;
  let left = budget;
  while (list.at < job.measurements) {
    if (left <= 0) return RUNNING;
    left -= UNITS_NUMBER * <f64>writeRows(list, list.at);
    ++list.at;
  }
  return OK;
}

/** Writes the rows of measurement k. Returns how many numbers it has. */
function writeRows(list: RowList, k: i32): i32 {
  const job = list.assembly, from = i32At(job.readStart, k), to = i32At(job.readStart, k + 1), m = i32At(job.rows, k);
  let columns = 0;
  for (let a = from; a < to; ++a) columns += i32At(job.sizes, i32At(job.reads, a));
  const residual = list.next + (<usize>(m * columns) << 3);
  for (let q = 0; q < m; ++q) {
    const before = list.entries;
    let entry = before, number = list.next + (<usize>q << 3);
    for (let a = from; a < to; ++a) {
      const state = i32At(job.reads, a), last = i32At(job.first, state + 1);
      for (let u = i32At(job.first, state); u < last; ++u, number += <usize>m << 3) {
        const value = load<f64>(number);
        if (value == 0) continue;
        setI32(list.column, entry, u);
        setF64(list.values, entry, value);
        ++entry;
      }
    }
    if (entry == before) continue;
    list.entries = entry;
    setF64(list.right, list.rows, f64At(residual, q));
    ++list.rows;
    setI32(list.rowStart, list.rows, entry);
  }
  list.next = residual + (<usize>m << 3);
  return m * (columns + 1);
}

/** Measurements done ÷ all of them. */
export function rowListProgress(list: RowList): f64 {
  const all = list.assembly.measurements;
  return all ? <f64>list.at / <f64>all : 1;
}
export function rowListRows(list: RowList): i32 { return list.rows; }
/** The results, good until the list is released; see `RowList`. */
export function rowListStart(list: RowList): usize { return list.rowStart; }
export function rowListColumn(list: RowList): usize { return list.column; }
export function rowListValues(list: RowList): usize { return list.values; }
export function rowListRight(list: RowList): usize { return list.right; }
