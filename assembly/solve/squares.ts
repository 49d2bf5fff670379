/** The diagonal of A⁻¹ as sums of squares, (A⁻¹)ⱼⱼ = ‖L⁻¹eⱼ‖², a forward solve over the path of each unknown, as a long call in slices.
 *  Dearer than the selected inverse, but nothing cancels: see block.ts.
 *  Source: Golub, Van Loan, "Matrix Computations", section 4.2; Gilbert, Peierls (1988), as in reach.ts. */
import { allocateArray, release } from "../memory/heap";
import { addF64, atF64, f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { Factor } from "../factor/cholesky";
import { forwardSolve, gatherRoom, stride } from "./triangular";

/** Columns of one supernode that go up its path together. */
const GROUP = 16;
/** Panel entries (times columns) a nanosecond. */
const ENTRIES_PER_UNIT = 2.0;

@unmanaged
export class Squares {
  factor: Factor;
  /** f64[n], caller's numbering: the diagonal. */
  diagonal: usize;
  /** f64[GROUP × n], f64[gatherRoom]; i32[supernodes]: the path. */
  x: usize;
  buffer: usize;
  list: usize;
  /** Column of L at hand. */
  at: i32;
}

/** Starts for a complete factor, which must stay; the results go to diagonal f64[n]. Null when memory runs out. */
export function squaresBegin(factor: Factor, diagonal: usize): Squares | null {
  const s = factor.symbolic, address = allocateArray(1, 6);
  if (!address) return null;
  assert(offsetof<Squares>() <= 64);
  memory.fill(address, 0, 64);
  const job = changetype<Squares>(address);
  job.factor = factor;
  job.diagonal = diagonal;
  job.x = allocateArray(<f64>GROUP * <f64>s.n, 3);
  job.buffer = allocateArray(gatherRoom(s, GROUP), 3);
  job.list = allocateArray(<f64>s.supernodes, 2);
  if (!job.x || !job.buffer || !job.list) { squaresRelease(job); return null; }
  return job;
}

export function squaresRelease(job: Squares): void {
  release(job.x);
  release(job.buffer);
  release(job.list);
  release(changetype<usize>(job));
}

/** OK when the diagonal is complete, else RUNNING. */
export function squaresAdvance(job: Squares, budget: f64): i32 {
  const s = job.factor.symbolic;
  let spent: f64 = 0;
  while (job.at < s.n) {
    if (spent >= budget) return RUNNING;
    const own = i32At(s.supernodeOf, job.at), columns = min(GROUP, i32At(s.first, own + 1) - job.at), side = stride(columns);
    let length = 0, entries: f64 = 0;
    for (let t = own; t >= 0; t = i32At(s.parent, t)) {
      const first = i32At(s.first, t), width = i32At(s.first, t + 1) - first;
      setI32(job.list, length++, t);
      memory.fill(atF64(job.x, first * side), 0, <usize>(width * side) << 3);
      entries += <f64>width * <f64>i32At(s.lead, t);
    }
    for (let c = 0; c < columns; ++c) {
      setF64(job.x, (job.at + c) * side + c, 1);
      setF64(job.diagonal, i32At(s.order, job.at + c), 0);
    }
    forwardSolve(job.factor, job.x, columns, job.list, 0, length, job.buffer);
    for (let k = 0; k < length; ++k) {
      const t = i32At(job.list, k), end = i32At(s.first, t + 1);
      for (let r = i32At(s.first, t); r < end; ++r) {
        for (let c = 0; c < columns; ++c) {
          const v = f64At(job.x, r * side + c);
          addF64(job.diagonal, i32At(s.order, job.at + c), v * v);
        }
      }
    }
    spent += 100 + entries * <f64>columns / ENTRIES_PER_UNIT;
    job.at += columns;
  }
  return OK;
}

/** Unknowns done ÷ unknowns. */
export function squaresProgress(job: Squares): f64 { return job.factor.symbolic.n > 0 ? <f64>job.at / <f64>job.factor.symbolic.n : 1; }
