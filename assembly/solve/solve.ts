/** Solutions of A X = B for many right-hand sides and columns of A⁻¹, as a long call in slices.
 *  Columns go through in groups: the panels are read once for the whole group. A column of the inverse starts at its own reach, so
 *  its forward half costs its path to the root only. */
import { allocateArray, release } from "../memory/heap";
import { f64At, i32At, setF64 } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { Factor } from "../factor/cholesky";
import { addPath, clearMarks } from "./reach";
import { backwardSolve, forwardSolve, gatherRoom, stride } from "./triangular";

/** Right-hand sides that go through the panels together. A guess: four
 *  vectors of lanes; not tuned yet. */
const GROUP = 16;
/** Supernodes between two looks at the budget. */
const STRIDE = 64;
/** Panel entries (times columns) a nanosecond. */
const ENTRIES_PER_UNIT = 2.0;

// What is done next to the group at hand.
const LOAD = 0, FORWARD = 1, BACKWARD = 2, STORE = 3;

@unmanaged
export class SolveJob {
  factor: Factor;
  /** f64[n × columns], column-major, caller's numbering: right-hand sides, then solutions. */
  target: usize;
  /** i32[columns]: unknowns whose unit vectors are the right-hand sides; 0: the target holds them. */
  units: usize;
  columns: i32;
  /** First column of the group at hand, and what is next for it. */
  group: i32;
  phase: i32;
  at: i32;
  /** Supernodes that the forward half walks: reach[reachFrom … supernodes − 1]. */
  reachFrom: i32;
  /** f64[stride × n] of a group, and f64[gatherRoom]. */
  x: usize;
  buffer: usize;
  /** i32[supernodes] twice. */
  reach: usize;
  mark: usize;
}

/** Starts solving for `columns` right-hand sides in `target`, or for the inverse's columns `units` into it. The factor must be
 *  complete and stay. Null when memory runs out. */
export function solveBegin(factor: Factor, target: usize, columns: i32, units: usize): SolveJob | null {
  const s = factor.symbolic, group = <f64>stride(min(columns, GROUP));
  const address = allocateArray(1, 7);
  if (!address) return null;
  assert(offsetof<SolveJob>() <= 128);
  memory.fill(address, 0, 128);
  const job = changetype<SolveJob>(address);
  job.factor = factor;
  job.target = target;
  job.units = units;
  job.columns = columns;
  job.x = allocateArray(group * <f64>s.n, 3);
  job.buffer = allocateArray(gatherRoom(s, min(columns, GROUP)), 3);
  job.reach = allocateArray(2 * <f64>s.supernodes, 2);
  job.mark = job.reach + (<usize>s.supernodes << 2);
  if (!job.x || !job.buffer || !job.reach) { solveRelease(job); return null; }
  memory.fill(job.mark, 0, <usize>s.supernodes << 2);
  return job;
}

export function solveRelease(job: SolveJob): void {
  release(job.x);
  release(job.buffer);
  release(job.reach);
  release(changetype<usize>(job));
}

/** OK when all columns are solved, else RUNNING. */
export function solveAdvance(job: SolveJob, budget: f64): i32 {
  const f = job.factor, s = f.symbolic, supernodes = s.supernodes;
  const unitsAStride = s.panelEntries / <f64>(supernodes + 1) * <f64>STRIDE / ENTRIES_PER_UNIT;
  let spent: f64 = 0;
  while (job.group < job.columns) {
    if (spent >= budget) return RUNNING;
    const columns = min(GROUP, job.columns - job.group);
    if (job.phase == LOAD) {
      loadGroup(job, columns);
      spent += <f64>(s.n * columns);
      job.phase = FORWARD;
      job.at = job.units ? job.reachFrom : 0;
    } else if (job.phase == FORWARD) {
      const to = min(job.at + STRIDE, supernodes);
      forwardSolve(f, job.x, columns, job.units ? job.reach : 0, job.at, to, job.buffer);
      spent += unitsAStride * <f64>columns;
      job.at = to;
      if (to == supernodes) job.phase = BACKWARD;
    } else if (job.phase == BACKWARD) {
      const from = max(job.at - STRIDE, 0);
      backwardSolve(f, job.x, columns, 0, from, job.at, job.buffer);
      spent += unitsAStride * <f64>columns;
      job.at = from;
      if (from == 0) job.phase = STORE;
    } else {
      for (let c = 0; c < columns; ++c) {
        const target = job.target + (<usize>(job.group + c) * <usize>s.n << 3), side = <usize>stride(columns);
        for (let k = 0; k < s.n; ++k) setF64(target, i32At(s.order, k), load<f64>(job.x + (<usize>k * side + <usize>c << 3)));
      }
      spent += <f64>(s.n * columns);
      job.phase = LOAD;
      job.group += columns;
    }
  }
  return OK;
}

/** Work done ÷ work of all columns, 0 to 1. */
export function solveProgress(job: SolveJob): f64 {
  if (job.group >= job.columns) return 1;
  const columns = <f64>min(GROUP, job.columns - job.group), half = <f64>job.at / <f64>(job.factor.symbolic.supernodes + 1);
  const within = job.phase == FORWARD ? 0.5 * half : job.phase == BACKWARD ? 1 - 0.5 * half : job.phase == STORE ? 1.0 : 0.0;
  return (<f64>job.group + columns * within) / <f64>job.columns;
}

/** Brings the group's right-hand sides into elimination order, side by side. */
function loadGroup(job: SolveJob, columns: i32): void {
  const s = job.factor.symbolic, n = s.n, side = <usize>stride(columns);
  memory.fill(job.x, 0, <usize>n * side << 3);
  if (!job.units) {
    for (let c = 0; c < columns; ++c) {
      const target = job.target + (<usize>(job.group + c) * <usize>n << 3);
      for (let k = 0; k < n; ++k) store<f64>(job.x + (<usize>k * side + <usize>c << 3), f64At(target, i32At(s.order, k)));
    }
    return;
  }
  let from = s.supernodes;
  for (let c = 0; c < columns; ++c) {
    const k = i32At(s.place, i32At(job.units, job.group + c));
    store<f64>(job.x + (<usize>k * side + <usize>c << 3), 1);
    from = addPath(s, i32At(s.supernodeOf, k), job.reach, from, job.mark);
  }
  clearMarks(job.reach, from, s.supernodes, job.mark);
  job.reachFrom = from;
}
