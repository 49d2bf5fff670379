/** The condition of a factored matrix A scaled to unit diagonal, κ = ‖M‖ with M = D A⁻¹ D, D = diag(A)^½, estimated from three halves of a
 *  solve with four columns, as a long call in slices: it tells how far rounding moves the factor's inverse, whatever units the unknowns are
 *  in (Demmel, "On floating point errors in Cholesky", LAPACK Working Note 14, 1989).
 *  With random vectors v and w = M v, Σ wᵀ M w ÷ Σ wᵀ w is a lower bound, the power method's; the mean of wᵀ M w is an estimate of tr M³,
 *  whose cube root is an upper bound in expectation. The larger of the two is given: only a v all but orthogonal to the leading
 *  vector makes both too small, and the cube root dulls that (Dixon, "Estimating extremal eigenvalues and condition numbers of matrices",
 *  SIAM J. Numer. Anal. 20 (1983); Hutchinson (1989)). */
import { allocateArray, release } from "./memory/heap";
import { f64At, i32At, setF64 } from "./memory/access";
import { OK, RUNNING } from "./memory/status";
import { Factor } from "./factor/cholesky";
import { backwardSolve, forwardSolve, gatherRoom } from "./solve/triangular";

/** Columns of random numbers. With two, one base in some thousand of badly scaled networks was called ten times too good. */
const COLUMNS = 4;
/** Makes a uniform signed 32-bit number one of variance 1: √3 ÷ 2³¹. */
const UNIT: f64 = 1.7320508075688772 / 2147483648.0;
/** Supernodes between two looks at the budget, and entries of a panel that one column goes through in a nanosecond. */
const STRIDE = 64, ENTRIES_PER_UNIT = 1.0;

@unmanaged
export class ScaledCondition {
  factor: Factor;
  /** f64[n], elimination order: the roots of A's diagonal. */
  roots: usize;
  /** f64[COLUMNS × n], the columns side by side for each unknown; gather buffer f64[gatherRoom]. */
  x: usize;
  buffer: usize;
  /** Halves done (forward, back, forward), and supernodes done of the one at hand. */
  half: i32;
  at: i32;
  /** Entries of L gone through. */
  done: f64;
  /** Σ wᵀ w. */
  squares: f64;
  estimate: f64;
}

/** Starts for a complete factor, which must stay; diagonal f64[n]: A's, caller's numbering, not kept. Null when memory runs out. */
export function scaledConditionBegin(factor: Factor, diagonal: usize): ScaledCondition | null {
  const s = factor.symbolic, n = s.n, address = allocateArray(1, 7);
  if (!address) return null;
  assert(offsetof<ScaledCondition>() <= 128);
  memory.fill(address, 0, 128);
  const job = changetype<ScaledCondition>(address);
  job.factor = factor;
  job.roots = allocateArray(<f64>n, 3);
  job.x = allocateArray(<f64>COLUMNS * <f64>n, 3);
  job.buffer = allocateArray(gatherRoom(s, COLUMNS), 3);
  if (!job.roots || !job.x || !job.buffer) { scaledConditionRelease(job); return null; }
  // Numbers from a fixed sequence (Marsaglia's xorshift, 2003), so that estimates repeat. Not signs: those cancel in a vector that has two
  // entries of the same size, as badly scaled networks have them.
  let state: u32 = 2463534242;
  for (let k = 0; k < n; ++k) {
    const root = Math.sqrt(f64At(diagonal, i32At(s.order, k)));
    setF64(job.roots, k, root);
    for (let c = 0; c < COLUMNS; ++c) {
      state ^= state << 13;
      state ^= state >> 17;
      state ^= state << 5;
      setF64(job.x, COLUMNS * k + c, root * UNIT * <f64><i32>state);
    }
  }
  return job;
}

export function scaledConditionRelease(job: ScaledCondition): void {
  release(job.roots);
  release(job.x);
  release(job.buffer);
  release(changetype<usize>(job));
}

/** Goes through about `budget` units of work. OK when the estimate is there, or RUNNING. */
export function scaledConditionAdvance(job: ScaledCondition, budget: f64): i32 {
  const s = job.factor.symbolic, count = s.supernodes;
  let spent: f64 = 0;
  while (job.half < 3) {
    while (job.at < count) {
      if (spent >= budget) return RUNNING;
      const to = min(job.at + STRIDE, count), back = job.half == 1;
      const low = back ? count - to : job.at, high = back ? count - job.at : to;
      if (back) backwardSolve(job.factor, job.x, COLUMNS, 0, low, high, job.buffer);
      else forwardSolve(job.factor, job.x, COLUMNS, 0, low, high, job.buffer);
      let entries: f64 = 0;
      for (let t = low; t < high; ++t) entries += <f64>(i32At(s.first, t + 1) - i32At(s.first, t)) * <f64>i32At(s.lead, t);
      spent += <f64>COLUMNS * entries / ENTRIES_PER_UNIT;
      job.done += entries;
      job.at = to;
    }
    if (job.half == 1) beginPowerStep(job);
    else if (job.half == 2) finishPowerStep(job);
    job.half += 1;
    job.at = 0;
  }
  return OK;
}

/** x holds A⁻¹ D v: with w = M v = D x, squares := Σ wᵀ w, x := D w. */
function beginPowerStep(job: ScaledCondition): void {
  let squares: f64 = 0;
  for (let k = 0, n = job.factor.symbolic.n; k < n; ++k) {
    const root = f64At(job.roots, k);
    for (let c = 0; c < COLUMNS; ++c) {
      const w = f64At(job.x, COLUMNS * k + c) * root;
      squares += w * w;
      setF64(job.x, COLUMNS * k + c, w * root);
    }
  }
  job.squares = squares;
}

/** x holds L⁻¹ D w: Σ xᵀ x = Σ wᵀ M w. */
function finishPowerStep(job: ScaledCondition): void {
  let sum: f64 = 0;
  for (let k = 0, n = COLUMNS * job.factor.symbolic.n; k < n; ++k) sum += f64At(job.x, k) * f64At(job.x, k);
  const cube = Math.cbrt(sum / <f64>COLUMNS), quotient = sum > 0 ? sum / job.squares : 0;
  job.estimate = Math.max(cube, quotient);
}

/** Work done ÷ all of it, 0 to 1. */
export function scaledConditionProgress(job: ScaledCondition): f64 {
  const whole = 3 * job.factor.symbolic.panelEntries;
  return whole > 0 ? Math.min(1, job.done / whole) : 1;
}
/** The estimate, once there: 0 for order 0. */
export function scaledConditionResult(job: ScaledCondition): f64 { return job.estimate; }
