/** The information matrix Σ Jᵀ J and vector Σ Jᵀ r of whitened rows, by blocks of states: its lower triangle by columns, rows ascending,
 *  the diagonal first, every state's block whole. A long call in slices.
 *  The blocks of the pattern are the pairs of states that some measurement reads together, brought into order by two counting sorts.
 *  Source: Golub, Van Loan, "Matrix Computations", section 5.3 (normal equations); Knuth, "The Art of Computer Programming", vol. 3,
 *  section 5.2 (distribution counting). */
import { allocateArray, release } from "../memory/heap";
import { atF64, addI32, f64At, i32At, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";

// What the job does next.
const PAIR = 0, SORT = 1, SPREAD = 2, LAY = 3, SUM = 4, DONE = 5;
/** Budget units (about 1 ns each) for one pair of states, or one number of a measurement. They set where slices end, never a result. */
const UNITS_PAIR = 4.0, UNITS_NUMBER = 4.0;

@unmanaged
export class Assembly {
  phase: i32;
  at: i32;
  /** States, their dimensions i32, measurements. */
  states: i32;
  sizes: usize;
  measurements: i32;
  /** i32[measurements + 1]: where the states of each begin in `reads`, an i32 list of distinct states; i32[measurements]: rows. */
  readStart: usize;
  reads: usize;
  rows: usize;
  /** f64: of each measurement its blocks, rows × dimension, column-major, and then its residual. Where the one at hand begins. */
  numbers: usize;
  next: usize;
  /** i32[pairs] each: the lower and the higher state of each pair, pairs by higher state, then by lower and higher; the offset of a
   *  pair's block below the diagonal block takes the place of the higher state in the end. */
  pairs: i32;
  pair: i32;
  low: usize;
  high: usize;
  byHigh: usize;
  byLow: usize;
  /** i32[states + 2] twice: where the pairs of a higher, and of a lower state begin. */
  highStart: usize;
  lowStart: usize;
  /** Results. order; i32[states + 1] first unknown; i32[order]: state of each unknown; i32[order + 1], i32[nonzeros], f64[nonzeros], f64[order]. */
  order: i32;
  first: usize;
  stateOf: usize;
  columnStart: usize;
  rowIndex: usize;
  values: usize;
  vector: usize;
}

/** Starts summing; all arrays must stay until the job is released. Null when memory runs out. */
export function assemblyBegin(
  states: i32, sizes: usize, measurements: i32, readStart: usize, reads: usize, rows: usize, numbers: usize,
): Assembly | null {
  const address = allocateArray(1, 8);
  if (!address) return null;
  assert(offsetof<Assembly>() <= 256);
  memory.fill(address, 0, 256);
  const job = changetype<Assembly>(address);
  job.states = states;
  job.sizes = sizes;
  job.measurements = measurements;
  job.readStart = readStart;
  job.reads = reads;
  job.rows = rows;
  job.numbers = numbers;
  let pairs: f64 = 0, order: f64 = 0;
  for (let k = 0; k < measurements; ++k) {
    const count = <f64>(i32At(readStart, k + 1) - i32At(readStart, k));
    pairs += count * (count - 1) / 2;
  }
  for (let s = 0; s < states; ++s) order += <f64>i32At(sizes, s);
  if (pairs > 1e9 || order > 2e9) { release(address); return null; }
  job.pairs = <i32>pairs;
  job.order = <i32>order;
  job.low = allocateArray(4 * pairs, 2);
  job.high = job.low + (<usize>job.pairs << 2);
  job.byHigh = job.high + (<usize>job.pairs << 2);
  job.byLow = job.byHigh + (<usize>job.pairs << 2);
  job.highStart = allocateArray(2 * (<f64>states + 2), 2);
  job.lowStart = job.highStart + (<usize>(states + 2) << 2);
  job.first = allocateArray(<f64>states + 1, 2);
  job.stateOf = allocateArray(order, 2);
  job.columnStart = allocateArray(order + 1, 2);
  job.vector = allocateArray(order, 3);
  if (!job.low || !job.highStart || !job.first || !job.stateOf || !job.columnStart || !job.vector) { assemblyRelease(job); return null; }
  memory.fill(job.highStart, 0, <usize>(2 * (states + 2)) << 2);
  memory.fill(job.vector, 0, <usize>job.order << 3);
  setI32(job.first, 0, 0);
  for (let s = 0, u = 0; s < states; ++s) {
    for (let t = i32At(sizes, s); t > 0; --t, ++u) setI32(job.stateOf, u, s);
    setI32(job.first, s + 1, u);
  }
  return job;
}

export function assemblyRelease(job: Assembly): void {
  release(job.low);
  release(job.highStart);
  release(job.first);
  release(job.stateOf);
  release(job.columnStart);
  release(job.rowIndex);
  release(job.values);
  release(job.vector);
  release(changetype<usize>(job));
}

/** Does about `budget` units of work. OK when the sums are complete, RUNNING or OUT_OF_MEMORY. */
export function assemblyAdvance(job: Assembly, budget: f64): i32 {
  let left = budget;
  while (job.phase != DONE) {
    if (left <= 0) return RUNNING;
    if (job.phase == PAIR) left = pairSome(job, left);
    else if (job.phase == SORT) left = sortSome(job, left, 0, job.high, job.highStart, job.byHigh, SPREAD);
    else if (job.phase == SPREAD) left = sortSome(job, left, job.byHigh, job.low, job.lowStart, job.byLow, LAY);
    else if (job.phase == LAY) { if (!layPattern(job)) return OUT_OF_MEMORY; left -= UNITS_PAIR * <f64>(job.states + job.pairs); }
    else left = sumSome(job, left);
  }
  return OK;
}

export function assemblyProgress(job: Assembly): f64 {
  if (job.phase == DONE) return 1;
  const all = job.phase == PAIR || job.phase == SUM ? job.measurements : job.pairs;
  return (<f64>job.phase + (all ? <f64>job.at / <f64>all : 0)) / <f64>DONE;
}

function turnTo(job: Assembly, phase: i32): void {
  job.phase = phase;
  job.at = 0;
  job.pair = 0;
  job.next = job.numbers;
}

/** Lists the pairs of states of some measurements and counts them. */
function pairSome(job: Assembly, budget: f64): f64 {
  let pair = job.pair, left = budget, k = job.at;
  for (; k < job.measurements && left > 0; ++k) {
    const from = i32At(job.readStart, k), to = i32At(job.readStart, k + 1), before = pair;
    for (let a = from + 1; a < to; ++a) {
      const sa = i32At(job.reads, a);
      for (let b = from; b < a; ++b, ++pair) {
        const sb = i32At(job.reads, b), low = min(sa, sb), high = max(sa, sb);
        setI32(job.low, pair, low);
        setI32(job.high, pair, high);
        addI32(job.highStart, high + 2, 1);
        addI32(job.lowStart, low + 2, 1);
      }
    }
    left -= UNITS_PAIR * <f64>(pair - before + 1);
  }
  job.pair = pair;
  job.at = k;
  if (k < job.measurements) return left;
  for (let s = 0; s <= job.states; ++s) {
    addI32(job.highStart, s + 1, i32At(job.highStart, s));
    addI32(job.lowStart, s + 1, i32At(job.lowStart, s));
  }
  turnTo(job, SORT);
  return left;
}

/** Some pairs, in the order of `from` (0: as listed), to `into` by their `key`; then comes phase `next`. Starts move up: start[s + 1] ends
 *  as where the pairs of s end. */
function sortSome(job: Assembly, budget: f64, from: usize, key: usize, start: usize, into: usize, next: i32): f64 {
  const to = min(job.pairs, job.at + 1 + <i32>min<f64>(budget / UNITS_PAIR, 1e9));
  for (let q = job.at; q < to; ++q) {
    const p = from ? i32At(from, q) : q, slot = start + (<usize>(i32At(key, p) + 1) << 2), place = load<i32>(slot);
    setI32(into, place, p);
    store<i32>(slot, place + 1);
  }
  const left = budget - UNITS_PAIR * <f64>(to - job.at);
  job.at = to;
  if (to == job.pairs) turnTo(job, next);
  return left;
}

/** The pattern; offsets of the pairs' blocks. False when memory runs out. */
function layPattern(job: Assembly): bool {
  let nonzeros: f64 = 0;
  for (let s = 0, q = 0; s < job.states; ++s) {
    const d = i32At(job.sizes, s), end = i32At(job.lowStart, s + 1);
    let under = 0;
    for (let last = -1; q < end; ++q) {
      const p = i32At(job.byLow, q), h = i32At(job.high, p);
      if (h != last) { under += i32At(job.sizes, h); last = h; }
    }
    const first = i32At(job.first, s);
    for (let t = 0; t < d; ++t) {
      setI32(job.columnStart, first + t, <i32>nonzeros);
      nonzeros += <f64>(d - t + under);
      if (nonzeros > 2e9) return false;
    }
  }
  setI32(job.columnStart, job.order, <i32>nonzeros);
  job.rowIndex = allocateArray(nonzeros, 2);
  job.values = allocateArray(nonzeros, 3);
  if (!job.rowIndex || !job.values) return false;
  memory.fill(job.values, 0, <usize>nonzeros << 3);
  for (let s = 0, q = 0; s < job.states; ++s) {
    const d = i32At(job.sizes, s), end = i32At(job.lowStart, s + 1), first = i32At(job.first, s), from = q;
    for (let t = 0; t < d; ++t) {
      let at = job.rowIndex + (<usize>i32At(job.columnStart, first + t) << 2);
      for (let u = t; u < d; ++u, at += 4) store<i32>(at, first + u);
      q = from;
      for (let last = -1; q < end; ++q) {
        const h = i32At(job.high, i32At(job.byLow, q));
        if (h == last) continue;
        last = h;
        for (let u = i32At(job.first, h), to = i32At(job.first, h + 1); u < to; ++u, at += 4) store<i32>(at, u);
      }
    }
    let under = 0;
    q = from;
    for (let last = -1, size = 0; q < end; ++q) {
      const p = i32At(job.byLow, q), h = i32At(job.high, p);
      if (h != last) { under += size; size = i32At(job.sizes, h); last = h; }
      setI32(job.high, p, under);
    }
  }
  turnTo(job, SUM);
  return true;
}

/** Adds up the products of some measurements. */
function sumSome(job: Assembly, budget: f64): f64 {
  let left = budget, k = job.at, pair = job.pair, next = job.next;
  for (; k < job.measurements && left > 0; ++k) {
    const from = i32At(job.readStart, k), to = i32At(job.readStart, k + 1), m = i32At(job.rows, k), begin = next;
    let residual = next;
    for (let a = from; a < to; ++a) residual += <usize>(m * i32At(job.sizes, i32At(job.reads, a))) << 3;
    let blockA = next;
    for (let a = from; a < to; ++a) {
      const sa = i32At(job.reads, a), da = i32At(job.sizes, sa), firstA = i32At(job.first, sa);
      for (let u = 0; u < da; ++u) {
        const at = atF64(job.vector, firstA + u);
        store<f64>(at, load<f64>(at) + product(m, blockA + (<usize>(u * m) << 3), residual));
      }
      let blockB = next;
      for (let b = from; b < a; ++b, ++pair) {
        const sb = i32At(job.reads, b), db = i32At(job.sizes, sb), under = i32At(job.high, pair);
        if (sa < sb) addBlock(job, sa, da, under, m, blockA, db, blockB);
        else addBlock(job, sb, db, under, m, blockB, da, blockA);
        blockB += <usize>(m * db) << 3;
      }
      addDiagonal(job, sa, da, m, blockA);
      blockA += <usize>(m * da) << 3;
    }
    next = residual + (<usize>m << 3);
    left -= UNITS_NUMBER * <f64>((next - begin) >> 3) * <f64>(to - from);
  }
  job.at = k;
  job.pair = pair;
  job.next = next;
  if (k == job.measurements) turnTo(job, DONE);
  return left;
}

// @ts-ignore: decorator
@inline
function product(m: i32, a: usize, b: usize): f64 {
  let sum: f64 = 0;
  for (let q = 0; q < m; ++q) sum += f64At(a, q) * f64At(b, q);
  return sum;
}

/** Adds rowBlockᵀ columnBlock below the diagonal block of the columns of `state`. */
function addBlock(job: Assembly, state: i32, width: i32, under: i32, m: i32, columnBlock: usize, height: i32, rowBlock: usize): void {
  const first = i32At(job.first, state), step = <usize>m << 3;
  for (let t = 0; t < width; ++t, columnBlock += step) {
    let at = atF64(job.values, i32At(job.columnStart, first + t) + width - t + under), row = rowBlock;
    for (let u = 0; u < height; ++u, row += step, at += 8) store<f64>(at, load<f64>(at) + product(m, row, columnBlock));
  }
}

function addDiagonal(job: Assembly, state: i32, width: i32, m: i32, block: usize): void {
  const first = i32At(job.first, state), step = <usize>m << 3;
  for (let t = 0; t < width; ++t) {
    let at = atF64(job.values, i32At(job.columnStart, first + t));
    const column = block + <usize>t * step;
    for (let u = t; u < width; ++u, at += 8) store<f64>(at, load<f64>(at) + product(m, block + <usize>u * step, column));
  }
}

export function assemblyOrder(job: Assembly): i32 { return job.order; }
/** The results, good until the job is released: i32[order + 1], i32[nonzeros], f64[nonzeros], f64[order]; i32[order]: state of each unknown. */
export function assemblyColumnStart(job: Assembly): usize { return job.columnStart; }
export function assemblyRowIndex(job: Assembly): usize { return job.rowIndex; }
export function assemblyValues(job: Assembly): usize { return job.values; }
export function assemblyVector(job: Assembly): usize { return job.vector; }
export function assemblyStateOf(job: Assembly): usize { return job.stateOf; }
