/** Entries of a selected inverse by the caller's numbering: those of A's pattern, or all of L's pattern as compressed columns. */
import { allocateArray, release } from "../memory/heap";
import { addI32, atF64, i32At, setF64, setI32, setU32, u32At } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { Symbolic } from "../symbolic/symbolic";
import { SelectedInverse } from "./selected-inverse";

/** out f64[nnzA], in the storage order of A's lower triangle: Z at A's own entries. Requires kept panels. The mirror image of the
 *  scattering of A's values. Cost: one move an entry. */
export function inverseOnMatrix(z: SelectedInverse, out: usize): void {
  const s = z.factor.symbolic;
  for (let t = 0; t < s.supernodes; ++t) {
    const panel = z.panels + (<usize>u32At(s.panel, t) << 3), stride = <usize>i32At(s.lead, t) << 3;
    for (let at = i32At(s.recordStart, t), last = i32At(s.recordStart, t + 1); at < last; ++at) {
      const record = s.records + <usize>(12 * at);
      let into = atF64(out, load<i32>(record)), from = atF64(panel, load<i32>(record, 4));
      const length = load<i32>(record, 8);
      if (length > 0) for (let k = 0; k < length; ++k, from += 8, into += 8) store<f64>(into, load<f64>(from));
      else for (let k = 0; k > length; --k, from += stride, into += 8) store<f64>(into, load<f64>(from));
    }
  }
}

/** All of Z that the panels hold, as the lower triangle by columns, rows ascending, caller's numbering:
 *  columnStart i32[n + 1], rowIndex i32[factorEntries], value f64[factorEntries].  OK or OUT_OF_MEMORY.
 *  Cost: two distributions of the entries, by row and then by column, so nothing is sorted. */
export function inverseFactorColumns(z: SelectedInverse, columnStart: usize, rowIndex: usize, value: usize): i32 {
  const s = z.factor.symbolic, n = s.n, entries = factorEntries(s);
  const rowStart = allocateArray(<f64>n + 1, 2), columnOf = allocateArray(entries, 2), place = allocateArray(entries, 2);
  const complete = rowStart && columnOf && place;
  if (complete) {
    memory.fill(rowStart, 0, <usize>(n + 1) << 2);
    memory.fill(columnStart, 0, <usize>(n + 1) << 2);
    for (let pass = 0; pass < 2; ++pass) {
      for (let t = 0; t < s.supernodes; ++t) {
        const first = i32At(s.first, t), end = i32At(s.first, t + 1), lead = i32At(s.lead, t), panel = u32At(s.panel, t);
        const rows = i32At(s.rowStart, t), height = end - first + i32At(s.rowStart, t + 1) - rows;
        for (let c = first; c < end; ++c) {
          const j = i32At(s.order, c);
          for (let k = c - first; k < height; ++k) {
            const i = i32At(s.order, first + k < end ? first + k : i32At(s.rows, rows + k - (end - first)));
            const row = max(i, j), column = min(i, j);
            if (pass == 0) { addI32(rowStart, row + 1, 1); addI32(columnStart, column + 1, 1); continue; }
            const at = i32At(rowStart, row);
            setI32(rowStart, row, at + 1);
            setI32(columnOf, at, column);
            setU32(place, at, panel + <u32>((c - first) * lead + k));
          }
        }
      }
      if (pass == 0) for (let k = 0; k < n; ++k) { addI32(rowStart, k + 1, i32At(rowStart, k)); addI32(columnStart, k + 1, i32At(columnStart, k)); }
    }
    // rowStart[i] is now the end of row i.
    for (let i = 0, at = 0; i < n; ++i) {
      for (const end = i32At(rowStart, i); at < end; ++at) {
        const column = i32At(columnOf, at), into = i32At(columnStart, column);
        setI32(columnStart, column, into + 1);
        setI32(rowIndex, into, i);
        setF64(value, into, load<f64>(z.panels + (<usize>u32At(place, at) << 3)));
      }
    }
    for (let j = n; j > 0; --j) setI32(columnStart, j, i32At(columnStart, j - 1));
    setI32(columnStart, 0, 0);
  }
  release(rowStart);
  release(columnOf);
  release(place);
  return complete ? OK : OUT_OF_MEMORY;
}

/** Entries that the panels hold in their lower trapezoids, stored zeros of L included. */
export function factorEntries(s: Symbolic): f64 {
  let entries: f64 = 0;
  for (let t = 0; t < s.supernodes; ++t) {
    const w = <f64>(i32At(s.first, t + 1) - i32At(s.first, t));
    entries += w * (0.5 * (w + 1) + <f64>(i32At(s.rowStart, t + 1) - i32At(s.rowStart, t)));
  }
  return entries;
}
