/** Where measurement rows enter the fronts, and what their orthogonal elimination will take: each row goes to the supernode of the
 *  first of its unknowns to be eliminated, whose columns and rows below hold all of its unknowns, since a row's unknowns all meet in
 *  JᵀJ. A front leaves at most as many rows to its parent as it has columns above its own.
 *  Sources: George, Heath, "Solution of sparse linear least squares problems using Givens rotations", Linear Algebra Appl. 34 (1980);
 *  Liu, "On general row merging schemes for sparse Givens transformations", SIAM J. Sci. Stat. Comput. 7 (1986). */
import { allocateArray, release } from "../memory/heap";
import { addI32, i32At, setI32 } from "../memory/access";
import { Symbolic } from "./symbolic";

@unmanaged
export class RowPlan {
  symbolic: Symbolic;
  /** Rows, and the entries of all of them: rowStart i32[rows + 1]; column i32[entries], an entry's place in the front (its columns, then
   *  its rows below) of the row's supernode. Both arrays are the caller's. */
  rows: i32;
  rowStart: usize;
  column: usize;
  /** i32[n + 1] and i32[rows]: the rows whose first column is each. */
  arrivalStart: usize;
  arrivals: usize;
  /** i32[supernodes]: the most rows that a supernode leaves to its parent. */
  leaves: usize;
  /** Rows of the tallest front. */
  mostRows: i32;
  /** Bytes of the largest front and of the stack of what children leave, one right-hand side carried along. */
  frontBytes: f64;
  stackBytes: f64;
  /** Multiplications and additions predicted for all fronts. */
  flops: f64;
}

/** Rows that arrive at a front of so many columns are eliminated so many at a time, each lot on top of the triangle that those before have left:
 *  a front then stays small however often the same things are measured (Demmel, Grigori, Hoemmen, Langou 2012, "Communication-optimal
 *  parallel and sequential QR and LU factorizations", SIAM J. Sci. Comput. 34). */
// @ts-ignore: decorator
@inline export function rowsAtOnce(columns: i32): i32 { return max(256, 2 * columns); }

/** Bytes of `count` rows that a front leaves, the k-th beginning at column k or later of `below`: their entries, what they carry, and
 *  where they begin. */
export function stackedBytes(count: i32, below: i32, carried: i32): f64 {
  const q = <f64>count;
  return 8 * (q * <f64>(below + carried + 1) - 0.5 * q * (q - 1));
}

/** Multiplications and additions, about, that triangularize `rows` rows of `columns` entries: 4·(rows not finished)·(columns left) a column,
 *  with half of the rows begun on average. */
export function frontFlops(rows: i32, columns: i32): f64 {
  const m = <f64>rows, n = <f64>columns, steps = min(m, n);
  return 2 * steps * (steps * steps / 3 + (m - steps) * n + 0.5 * steps * (n - steps)) + 8 * m * n;
}

/** Plans for rows of this pattern, or null when memory runs out. rowStart i32[rows + 1] and column i32[entries] must stay; column holds
 *  the caller's unknowns, any order, and is turned into places in the front. No row may be empty. Cost: O(entries + rows + n). */
export function rowPlanCreate(s: Symbolic, rows: i32, rowStart: usize, column: usize): RowPlan | null {
  const address = allocateArray(1, 7);
  if (!address) return null;
  assert(offsetof<RowPlan>() <= 128);
  memory.fill(address, 0, 128);
  const plan = changetype<RowPlan>(address), n = s.n, supernodes = s.supernodes;
  plan.symbolic = s;
  plan.rows = rows;
  plan.rowStart = rowStart;
  plan.column = column;
  plan.arrivalStart = allocateArray(<f64>n + 1, 2);
  plan.arrivals = allocateArray(<f64>rows, 2);
  plan.leaves = allocateArray(<f64>supernodes, 2);
  const firstOf = allocateArray(<f64>rows + <f64>n, 2), start = plan.arrivalStart;
  if (!start || !plan.arrivals || !plan.leaves || !firstOf) { release(firstOf); rowPlanRelease(plan); return null; }
  memory.fill(start, 0, <usize>(n + 1) << 2);
  for (let r = 0, p = 0; r < rows; ++r) {
    const end = i32At(rowStart, r + 1);
    assert(p < end, "no row is empty");
    let least = n;
    for (; p < end; ++p) {
      const c = i32At(s.place, i32At(column, p));
      setI32(column, p, c);
      least = min(least, c);
    }
    setI32(firstOf, r, least);
    addI32(start, least, 1);
  }
  // By counting: the sums are the ends, and filled from the last row on they become the starts.
  for (let c = 0; c < n; ++c) addI32(start, c + 1, i32At(start, c));
  for (let r = rows - 1; r >= 0; --r) {
    const c = i32At(firstOf, r), at = i32At(start, c) - 1;
    setI32(plan.arrivals, at, r);
    setI32(start, c, at);
  }
  placeEntries(plan, firstOf + (<usize>rows << 2));
  release(firstOf);
  layFronts(plan);
  return plan;
}

export function rowPlanRelease(plan: RowPlan): void {
  release(plan.arrivalStart);
  release(plan.arrivals);
  release(plan.leaves);
  release(changetype<usize>(plan));
}

/** Multiplications and additions predicted for the elimination. */
export function rowPlanFlops(plan: RowPlan): f64 { return plan.flops; }

/** Turns the entries' columns into places in their fronts. `local` i32[n] is workspace without requirement. */
function placeEntries(plan: RowPlan, local: usize): void {
  const s = plan.symbolic;
  for (let t = 0; t < s.supernodes; ++t) {
    const first = i32At(s.first, t), end = i32At(s.first, t + 1);
    for (let q = i32At(s.rowStart, t), last = i32At(s.rowStart, t + 1), k = end - first - q; q < last; ++q) setI32(local, i32At(s.rows, q), q + k);
    for (let q = i32At(plan.arrivalStart, first), last = i32At(plan.arrivalStart, end); q < last; ++q) {
      const r = i32At(plan.arrivals, q);
      for (let p = i32At(plan.rowStart, r), to = i32At(plan.rowStart, r + 1); p < to; ++p) {
        const c = i32At(plan.column, p);
        setI32(plan.column, p, c < end ? c - first : i32At(local, c));
      }
    }
  }
}

/** Sizes of fronts and stack, going up the tree: what children leave lies on top of the stack when their parent takes it. */
function layFronts(plan: RowPlan): void {
  const s = plan.symbolic;
  let held: f64 = 0;
  for (let t = 0; t < s.supernodes; ++t) {
    const first = i32At(s.first, t), end = i32At(s.first, t + 1), width = end - first;
    const below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t), columns = width + below, most = rowsAtOnce(columns);
    let waiting = i32At(plan.arrivalStart, end) - i32At(plan.arrivalStart, first), rows = min(waiting, most);
    for (let e = i32At(s.childStart, t), last = i32At(s.childStart, t + 1); e < last; ++e) {
      const c = i32At(s.children, e), left = i32At(plan.leaves, c);
      rows += left;
      held -= stackedBytes(left, i32At(s.rowStart, c + 1) - i32At(s.rowStart, c), 1);
    }
    for (waiting -= min(waiting, most); ; waiting -= min(waiting, most)) {
      plan.flops += frontFlops(rows, columns);
      plan.mostRows = max(plan.mostRows, rows);
      plan.frontBytes = Math.max(plan.frontBytes, 8 * <f64>rows * <f64>frontLead(columns, 1));
      if (waiting == 0) break;
      const triangle = min(rows, columns);
      plan.stackBytes = Math.max(plan.stackBytes, held + stackedBytes(triangle, columns, 1));
      rows = triangle + min(waiting, most);
    }
    const left = max(0, min(rows - width, below));
    setI32(plan.leaves, t, left);
    held += stackedBytes(left, below, 1);
    plan.stackBytes = Math.max(plan.stackBytes, held);
  }
}

/** Entries from one row of a front of `columns` columns, and what it carries, to the next: even. */
// @ts-ignore: decorator
@inline export function frontLead(columns: i32, carried: i32): i32 { return columns + carried + 1 & ~1; }
