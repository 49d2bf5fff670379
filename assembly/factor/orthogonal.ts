/** L with JᵀJ = L Lᵀ (elimination order) from the rows J themselves, by orthogonal elimination front by front: the condition of J is not
 *  squared on the way. Each front stacks the triangles that its children left on the rows that arrive at it, is triangularized, gives
 *  its first rows to the panel (R = Lᵀ, its diagonal positive) and leaves the rest to its parent. The reflections are not kept;
 *  a right-hand side b is carried along, so that the least-squares solution needs no normal equations: Lᵀ x = (Qᵀ b) on top.
 *  Sources: Liu (1986), "On general row merging schemes for sparse Givens transformations", SIAM J. Sci. Stat. Comput. 7; Amestoy, Duff,
 *  Puglisi (1996), "Multifrontal QR factorization in a multiprocessor environment", Numer. Linear Algebra Appl. 3; the right-hand side:
 *  Golub (1965), "Numerical methods for solving linear least squares problems", Numer. Math. 7. */
import { allocate, allocateArray, release } from "../memory/heap";
import { addF64, addI32, atF64, f64At, i32At, setF64, setI32, setU32, u32At } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";
import { householderScratch, triangularize } from "../dense/householder";
import { backwardSolve, gatherRoom } from "../solve/triangular";
import { frontFlops, frontLead, RowPlan, rowsAtOnce } from "../symbolic/row-plan";
import { Symbolic } from "../symbolic/symbolic";
import { Factor } from "./cholesky";

/** A diagonal entry of R at most this share of its column's norm is rounding noise: the unknown is not determined in f64. */
export const RANK_FLOOR: f64 = 16 * f64.EPSILON;
/** Columns of a large front reduced in one piece of a sliced call, and the entries from which a front counts as large. */
const SLICE = 32, LARGE = 65536;
/** Flops a nanosecond, and nanoseconds a supernode and an entry gathered, for the budget. */
const FLOPS_PER_UNIT = 8.0, UNITS_PER_SUPERNODE = 200.0;

// What is done next to the supernode at hand.
const GATHER = 0, REDUCE = 1, STORE = 2;

@unmanaged
export class Orthogonal {
  factor: Factor;
  plan: RowPlan;
  /** f64[entries] and f64[rows]: the rows' numbers, their variances 1, and the right-hand side, or 0. */
  values: usize;
  right: usize;
  /** 1 with a right-hand side, else 0, and the power of two by which it is multiplied. */
  carried: i32;
  rightScale: f64;
  /** f64[n], caller's numbering: squared norms of the columns. */
  squares: usize;
  /** f64[n], elimination order: Qᵀb. */
  turned: usize;
  /** The front at hand, and what finished fronts have left, both in bytes. */
  front: usize;
  stack: usize;
  /** u32[supernodes] and i32[supernodes]: where in the stack a supernode's rows lie, and how many. */
  stackAt: usize;
  left: usize;
  top: usize;
  /** i32[tallest + 1] each: ends of the staircase; columns at which rows of R begin. */
  ends: usize;
  leads: usize;
  scratch: usize;
  /** Supernode at hand, what is next for it, which of its arriving rows comes next (−1: none has come), from which column the front is to
   *  be reduced, rows in the front, rows finished. */
  at: i32;
  phase: i32;
  arrival: i32;
  from: i32;
  rows: i32;
  finished: i32;
  /** The diagonal entry that stopped it. */
  pivot: f64;
  /** frontFlops of the finished fronts, and of the columns of the one at hand. */
  done: f64;
  underway: f64;
}

/** Bytes that orthogonalBegin takes: the largest front, what waits for it, a few numbers a row and unknown. */
export function orthogonalBytes(plan: RowPlan): f64 {
  const s = plan.symbolic;
  return plan.frontBytes + plan.stackBytes + <f64>householderScratch(plan.mostRows) + 8 * <f64>s.n + 8 * <f64>s.supernodes + 8 * <f64>s.tallest + 264;
}

/** Starts eliminating rows with these numbers, f64[entries] in the plan's order; right f64[rows], or 0: no right-hand side. All of them
 *  must stay, and so must squares f64[n]: the squared norms of the columns, caller's numbering, between 2^−900 and 2^900, so that no
 *  product of two entries overflows and none that counts vanishes. The rows' variances are 1. Whatever the factor held is lost.
 *  Null when memory runs out. */
export function orthogonalBegin(factor: Factor, plan: RowPlan, values: usize, right: usize, squares: usize): Orthogonal | null {
  const s = factor.symbolic, address = allocateArray(1, 8);
  if (!address) return null;
  assert(offsetof<Orthogonal>() <= 256 && plan.symbolic == s, "rows planned for this pattern");
  memory.fill(address, 0, 256);
  const job = changetype<Orthogonal>(address), n = <f64>s.n, tallest = <f64>s.tallest;
  job.factor = factor;
  job.plan = plan;
  job.values = values;
  job.right = right;
  job.carried = right ? 1 : 0;
  job.squares = squares;
  job.arrival = -1;
  job.turned = allocateArray(n, 3);
  job.front = allocateArray(plan.frontBytes, 0);
  job.stack = allocateArray(plan.stackBytes, 0);
  job.stackAt = allocateArray(2 * <f64>s.supernodes, 2);
  job.ends = allocateArray(2 * tallest + 2, 2);
  job.scratch = allocate(householderScratch(plan.mostRows));
  const complete = job.turned && job.front && job.stack && job.stackAt && job.ends && job.scratch;
  if (!complete) { orthogonalRelease(job); return null; }
  job.left = job.stackAt + (<usize>s.supernodes << 2);
  job.leads = job.ends + (<usize>(s.tallest + 1) << 2);
  let largest: f64 = 0;
  if (right) for (let r = 0; r < plan.rows; ++r) largest = max(largest, Math.abs(f64At(right, r)));
  job.rightScale = scaleOf(largest);
  return job;
}

export function orthogonalRelease(job: Orthogonal): void {
  release(job.turned);
  release(job.front);
  release(job.stack);
  release(job.stackAt);
  release(job.ends);
  release(job.scratch);
  release(changetype<usize>(job));
}

/** The power of two that brings `size` to [1, 2), held within the range of exponents whose own reciprocal is a normal number. */
function scaleOf(size: f64): f64 {
  const exponent = <i64>(reinterpret<u64>(size) >> 52);
  return reinterpret<f64>(2046 - max<i64>(1, min<i64>(exponent, 2045)) << 52);
}

/** Does about `budget` units of work. OK when L is complete, RUNNING, or 1 + the caller's unknown that the rows do not determine, given
 *  those eliminated before it (see orthogonalPivot). After a failure L is unusable until a factorization succeeds. */
export function orthogonalAdvance(job: Orthogonal, budget: f64): i32 {
  const s = job.factor.symbolic;
  let spent: f64 = 0;
  while (job.at < s.supernodes) {
    if (spent >= budget) return RUNNING;
    const t = job.at, columns = i32At(s.first, t + 1) - i32At(s.first, t) + i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const ld = frontLead(columns, job.carried);
    if (job.phase == GATHER) {
      gatherFront(job, t, columns, ld);
      spent += UNITS_PER_SUPERNODE + <f64>job.rows * <f64>ld;
      job.phase = REDUCE;
      job.from = 0;
      job.finished = 0;
    } else if (job.phase == REDUCE) {
      const to = job.rows * ld < LARGE ? columns : min(job.from + SLICE, columns);
      job.finished = triangularize(columns, job.front, ld, job.ends, job.from, to, job.finished, job.leads, job.scratch);
      spent += frontFlops(job.rows, columns) * <f64>(to - job.from) / <f64>columns / FLOPS_PER_UNIT;
      job.from = to;
      job.underway = frontFlops(job.rows, columns) * <f64>to / <f64>columns;
      if (to == columns) {
        job.done += job.underway;
        job.underway = 0;
        job.phase = STORE;
      }
    } else if (job.arrival < i32At(job.plan.arrivalStart, i32At(s.first, t + 1))) {
      stackRows(job, stackBase(job, t), 0, 0, columns, ld); // more rows arrive on what these have left
      job.phase = GATHER;
    } else {
      const failed = storePanel(job, t, columns, ld);
      if (failed) return failed;
      const width = i32At(s.first, t + 1) - i32At(s.first, t), base = stackBase(job, t);
      setU32(job.stackAt, t, <u32>base);
      setI32(job.left, t, job.finished - width);
      assert(job.finished - width <= i32At(job.plan.leaves, t), "more rows left than planned");
      job.top = stackRows(job, base, width, width, columns, ld);
      job.phase = GATHER;
      job.arrival = -1;
      ++job.at;
    }
  }
  return OK;
}

/** Work done ÷ work predicted, 0 to 1. */
export function orthogonalProgress(job: Orthogonal): f64 { return job.plan.flops > 0 ? min(1.0, (job.done + job.underway) / job.plan.flops) : 1; }
/** The diagonal entry of R that stopped the elimination. */
export function orthogonalPivot(job: Orthogonal): f64 { return job.pivot; }

/** The front of supernode t, rows sorted by where they begin: counted first, then put in their places. The first time it holds what the
 *  children left and rows that arrive, later what those before have left and more of them. */
function gatherFront(job: Orthogonal, t: i32, columns: i32, ld: i32): void {
  const plan = job.plan, s = plan.symbolic, first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
  const ends = job.ends, row = <usize>ld << 3, start = plan.arrivalStart, isFirst = job.arrival < 0;
  const from = isFirst ? i32At(start, first) : job.arrival, to = min(from + rowsAtOnce(columns), i32At(start, first + width));
  setI32(ends, 0, 0);
  for (let k = 0; k < columns; ++k)
    setI32(ends, k + 1, k < width ? max(0, min(to, i32At(start, first + k + 1)) - max(from, i32At(start, first + k))) : 0);
  takeStacked(job, t, isFirst, columns, 0);
  for (let k = 0; k < columns; ++k) addI32(ends, k + 1, i32At(ends, k));
  job.rows = i32At(ends, columns);
  memory.fill(job.front, 0, <usize>job.rows * row);
  // ends[k] is where the next row that begins at column k goes, and in the end how many begin up to there.
  takeStacked(job, t, isFirst, columns, row);
  for (let k = 0, q = from; q < to; ++k) {
    for (const last = min(to, i32At(start, first + k + 1)); q < last; ++q) {
      const r = i32At(plan.arrivals, q), place = i32At(ends, k), into = job.front + <usize>place * row;
      setI32(ends, k, place + 1);
      for (let p = i32At(plan.rowStart, r), end = i32At(plan.rowStart, r + 1); p < end; ++p) addF64(into, i32At(plan.column, p), f64At(job.values, p));
      if (job.carried) setF64(into, columns, f64At(job.right, r) * job.rightScale);
    }
  }
  job.arrival = to;
}

/** One run of all the columns, for rows that go back into the front they came from. */
const whole = memory.data(8, 4);

/** The rows that wait on the stack for supernode t's front: what its children left, or what it had before. */
function takeStacked(job: Orthogonal, t: i32, isFirst: bool, columns: i32, row: usize): void {
  const s = job.factor.symbolic;
  if (!isFirst) {
    store<i32>(whole, 0);
    store<i32>(whole, columns, 4);
    takeRows(job, whole, whole + 8, columns, job.stack + stackBase(job, t), job.finished, columns, row);
    return;
  }
  for (let e = i32At(s.childStart, t), end = i32At(s.childStart, t + 1); e < end; ++e) {
    const c = i32At(s.children, e), runs = s.runs + (<usize>i32At(s.runStart, c) << 3), lastRun = s.runs + (<usize>i32At(s.runEnd, c) << 3);
    const own = i32At(s.rowStart, c + 1) - i32At(s.rowStart, c);
    takeRows(job, runs, lastRun, own, job.stack + u32At(job.stackAt, c), i32At(job.left, c), columns, row);
  }
}

/** Walks `count` stacked rows of `own` columns, which begin at ascending ones; runs say where those stand in the front. With row = 0 counts
 *  the rows where they begin in the front, one place late; else copies them into the front of `columns` columns. */
function takeRows(job: Orthogonal, run: usize, lastRun: usize, own: i32, from: usize, count: i32, columns: i32, row: usize): void {
  const carried = job.carried;
  let before = 0; // columns of the rows before this run
  for (; count > 0; --count) {
    const begins = load<i32>(from);
    while (begins >= before + load<i32>(run, 4)) { before += load<i32>(run, 4); run += 8; }
    const position = load<i32>(run) + begins - before;
    from += 8;
    if (row) {
      const place = i32At(job.ends, position), into = job.front + <usize>place * row;
      setI32(job.ends, position, place + 1);
      let length = before + load<i32>(run, 4) - begins;
      copyRun(from, atF64(into, position), length);
      let entry = from + (<usize>length << 3);
      for (let next = run + 8; next < lastRun; next += 8) {
        length = load<i32>(next, 4);
        copyRun(entry, atF64(into, load<i32>(next)), length);
        entry += <usize>length << 3;
      }
      if (carried) setF64(into, columns, load<f64>(entry));
    } else addI32(job.ends, position + 1, 1);
    from += <usize>(own - begins + carried) << 3;
  }
}

// @ts-ignore: decorator
@inline
function copyRun(from: usize, into: usize, count: i32): void {
  let k = count;
  for (; k >= 2; k -= 2, from += 16, into += 16) v128.store(into, v128.load(from));
  if (k) store<f64>(into, load<f64>(from));
}

/** The supernode's own rows of R into its panel, as columns of L with a positive diagonal. 0, or 1 + the unknown whose row is missing or
 *  too small. */
function storePanel(job: Orthogonal, t: i32, columns: i32, ld: i32): i32 {
  const s = job.factor.symbolic, first = i32At(s.first, t), width = i32At(s.first, t + 1) - first, lead = i32At(s.lead, t);
  const panel = job.factor.panels + (<usize>u32At(s.panel, t) << 3);
  for (let i = 0; i < width; ++i) {
    const from = job.front + (<usize>i * <usize>ld << 3), begins = i < job.finished && i32At(job.leads, i) == i;
    const diagonal = begins ? f64At(from, i) : 0, unknown = i32At(s.order, first + i);
    if (!(Math.abs(diagonal) > RANK_FLOOR * Math.sqrt(f64At(job.squares, unknown)))) {
      job.pivot = Math.abs(diagonal);
      return 1 + unknown;
    }
    // Pairs of entries, from the even one at or before the diagonal; ld is no less than the panel's lead.
    const sign = diagonal < 0 ? -1.0 : 1.0, signs = f64x2.splat(sign);
    const into = atF64(panel, i * lead);
    let k = 0;
    for (; k < (i & ~1); ++k) setF64(into, k, 0);
    for (; k < columns; k += 2) v128.store(atF64(into, k), f64x2.mul(signs, v128.load(atF64(from, k))));
    if (i & 1) setF64(into, i - 1, 0);
    if (job.carried) setF64(job.turned, first + i, sign * f64At(from, columns));
  }
  return 0;
}

/** Where supernode t's rows go on the stack: in place of what its children had there. */
function stackBase(job: Orthogonal, t: i32): usize {
  const s = job.factor.symbolic, child = i32At(s.childStart, t);
  return child < i32At(s.childStart, t + 1) ? u32At(job.stackAt, i32At(s.children, child)) : job.top;
}

/** Puts the front's finished rows from `row` on at byte `at` of the stack: each the column where it begins, counted from `origin`, then its
 *  entries. Returns where they end. */
function stackRows(job: Orthogonal, at: usize, row: i32, origin: i32, columns: i32, ld: i32): usize {
  let into = job.stack + at;
  for (let i = row; i < job.finished; ++i) {
    const begins = i32At(job.leads, i), count = columns + job.carried - begins;
    store<i32>(into, begins - origin);
    copyRun(job.front + (<usize>(i * ld + begins) << 3), into + 8, count);
    into += <usize>(count + 1) << 3;
  }
  assert(<f64>(into - job.stack) <= job.plan.stackBytes, "the stack is as planned");
  return into - job.stack;
}

/** The least-squares solution of J x ≈ b into out f64[n], caller's numbering, of a complete elimination with a right-hand side.
 *  OK or OUT_OF_MEMORY. Cost: a backward solve. */
export function orthogonalSolution(job: Orthogonal, out: usize): i32 {
  const s = job.factor.symbolic, buffer = allocateArray(gatherRoom(s, 1), 3);
  if (!buffer) return OUT_OF_MEMORY;
  backwardSolve(job.factor, job.turned, 1, 0, 0, s.supernodes, buffer);
  for (let c = 0; c < s.n; ++c) setF64(out, i32At(s.order, c), f64At(job.turned, c) / job.rightScale);
  release(buffer);
  return OK;
}

/** The first n entries of Qᵀb into out f64[n], elimination order, of a complete elimination with a right-hand side: L⁻¹ Jᵀb. */
export function orthogonalTurned(job: Orthogonal, out: usize): void {
  for (let c = 0, n = job.factor.symbolic.n; c < n; ++c) setF64(out, c, f64At(job.turned, c) / job.rightScale);
}
