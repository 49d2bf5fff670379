/** An estimate of the reciprocal condition number 1 ÷ (‖A‖₁ ‖A⁻¹‖₁) from a few solves.
 *  The block form with two columns of Higham and Tisseur's estimator of ‖A⁻¹‖₁; it never overestimates, and is seldom more than a
 *  factor of 3 below.
 *  Source: Higham, Tisseur, "A block algorithm for matrix 1-norm estimation, with an application to 1-norm pseudospectra", SIAM J.
 *  Matrix Anal. Appl. 21 (2000), algorithm 2.4. */
import { allocateArray, release } from "./memory/heap";
import { addF64, atF64, f64At, i32At, setF64 } from "./memory/access";
import { Factor } from "./factor/cholesky";
import { backwardSolve, forwardSolve } from "./solve/triangular";

const ROUNDS = 5;
/** Unit vectors tried so far: two a round. */
const TRIED = 2 * ROUNDS;

/** ‖A‖₁ of the lower triangle by columns. sums f64[n] is workspace. */
function norm(n: i32, columnStart: usize, rowIndex: usize, values: usize, sums: usize): f64 {
  memory.fill(sums, 0, <usize>n << 3);
  for (let j = 0; j < n; ++j) {
    for (let p = i32At(columnStart, j), end = i32At(columnStart, j + 1); p < end; ++p) {
      const i = i32At(rowIndex, p), a = Math.abs(f64At(values, p));
      addF64(sums, j, a);
      if (i != j) addF64(sums, i, a);
    }
  }
  let largest: f64 = 0;
  for (let j = 0; j < n; ++j) if (f64At(sums, j) > largest) largest = f64At(sums, j);
  return largest;
}

/** X := A⁻¹ X for two columns side by side, elimination order. */
function solveTwo(f: Factor, x: usize, buffer: usize): void {
  forwardSolve(f, x, 2, 0, 0, f.symbolic.supernodes, buffer);
  backwardSolve(f, x, 2, 0, 0, f.symbolic.supernodes, buffer);
}

// The two columns lie side by side: entry k of column c is number 2 k + c.

/** Σ |x| of column c. */
function columnSum(n: i32, x: usize, c: i32): f64 {
  let sum: f64 = 0;
  for (let k = 0; k < n; ++k) sum += Math.abs(f64At(x, 2 * k + c));
  return sum;
}

/** Whether two columns of ±1 are parallel. */
function parallel(n: i32, a: usize, c: i32, b: usize, d: i32): bool {
  let product: f64 = 0;
  for (let k = 0; k < n; ++k) product += f64At(a, 2 * k + c) * f64At(b, 2 * k + d);
  return Math.abs(product) == <f64>n;
}

/** Fills column c with ±scale from a fixed sequence (Marsaglia's xorshift, 2003), so that estimates repeat. */
function scatterSigns(n: i32, x: usize, c: i32, scale: f64, state: u32): u32 {
  for (let k = 0; k < n; ++k) {
    state ^= state << 13;
    state ^= state >> 17;
    state ^= state << 5;
    setF64(x, 2 * k + c, state & 64 ? scale : -scale);
  }
  return state;
}

/** 1 ÷ (‖A‖₁ × estimate of ‖A⁻¹‖₁) for a complete factor of A (lower triangle by columns, caller's numbering).
 *  0 for order 0; −1 when memory runs out.  Cost: at most ten solves with two columns. */
export function reciprocalCondition(f: Factor, columnStart: usize, rowIndex: usize, values: usize): f64 {
  const s = f.symbolic, n = s.n;
  if (n == 0) return 0;
  const x = allocateArray(6 * <f64>n, 3), buffer = allocateArray(2 * <f64>s.deepest, 3);
  let result: f64 = -1;
  if (x && buffer) {
    const ofA = norm(n, columnStart, rowIndex, values, x);
    result = 1 / (ofA * inverseNorm(f, x, buffer));
  }
  release(x);
  release(buffer);
  return result;
}

/** The estimate of ‖A⁻¹‖₁. x f64[6 n]: three pairs of columns. */
function inverseNorm(f: Factor, x: usize, buffer: usize): f64 {
  const n = f.symbolic.n, signs = atF64(x, 2 * n), signsBefore = atF64(x, 4 * n);
  let state: u32 = 2463534242, estimate: f64 = 0, bestUnit = -1, tried = 0;
  for (let k = 0; k < n; ++k) setF64(x, 2 * k, 1 / <f64>n);
  state = scatterSigns(n, x, 1, 1 / <f64>n, state);
  memory.fill(signsBefore, 0, <usize>n << 4);
  // The units of this round's columns, and of all before; −1: not a unit vector.
  const history = memory.data(4 * TRIED, 4);
  let unit0 = -1, unit1 = -1;
  for (let round = 0; round <= ROUNDS; ++round) {
    solveTwo(f, x, buffer);
    const sum0 = columnSum(n, x, 0), sum1 = columnSum(n, x, 1), largest = Math.max(sum0, sum1);
    if (round > 0 && largest <= estimate) return estimate;
    estimate = largest;
    bestUnit = sum0 >= sum1 ? unit0 : unit1;
    if (round == ROUNDS) break;
    for (let k = 0; k < 2 * n; ++k) setF64(signs, k, f64At(x, k) < 0 ? -1 : 1);
    let parallels = 0;
    for (let c = 0; c < 2; ++c) if (parallel(n, signs, c, signsBefore, 0) || parallel(n, signs, c, signsBefore, 1)) ++parallels;
    if (parallels == 2) return estimate;
    if (n > 1) {
      for (let c = 0; c < 2; ++c) {
        for (let tries = 0; tries < 4; ++tries) {
          if (!parallel(n, signs, c, signsBefore, 0) && !parallel(n, signs, c, signsBefore, 1) && !(c == 1 && parallel(n, signs, 1, signs, 0))) break;
          state = scatterSigns(n, signs, c, 1, state);
        }
      }
    }
    memory.copy(signsBefore, signs, <usize>n << 4);
    memory.copy(x, signs, <usize>n << 4);
    solveTwo(f, x, buffer);
    // The two rows of largest magnitude that were not tried yet become the next unit vectors.
    let first = -1, second = -1, firstSize: f64 = -1, secondSize: f64 = -1, largestSize: f64 = 0;
    for (let k = 0; k < n; ++k) {
      const size = Math.max(Math.abs(f64At(x, 2 * k)), Math.abs(f64At(x, 2 * k + 1)));
      if (size > largestSize) largestSize = size;
      if (size <= secondSize || wasTried(history, tried, k)) continue;
      if (size > firstSize) { second = first; secondSize = firstSize; first = k; firstSize = size; } else { second = k; secondSize = size; }
    }
    if (round > 0 && bestUnit >= 0) {
      const sizeOfBest = Math.max(Math.abs(f64At(x, 2 * bestUnit)), Math.abs(f64At(x, 2 * bestUnit + 1)));
      if (largestSize <= sizeOfBest) return estimate;
    }
    if (first < 0) return estimate;
    if (second < 0) second = first;
    memory.fill(x, 0, <usize>n << 4);
    setF64(x, 2 * first, 1);
    setF64(x, 2 * second + 1, 1);
    unit0 = first;
    unit1 = second;
    store<i32>(history + (<usize>tried << 2), first);
    store<i32>(history + (<usize>(tried + 1) << 2), second);
    tried += 2;
  }
  return estimate;
}

function wasTried(history: usize, tried: i32, k: i32): bool {
  for (let t = 0; t < tried; ++t) if (i32At(history, t) == k) return true;
  return false;
}
