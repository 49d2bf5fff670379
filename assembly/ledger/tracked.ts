/** Marginals kept current: the diagonal blocks of Σ and one block column of it, changed by what a batch of rows changes.
 *  With W = Σ Aᵀ before the batch and its signed factor  C + A Σ Aᵀ = K J Kᵀ,  B = W K⁻ᵀ:
 *      Σᵢⱼ' = Σᵢⱼ − Bᵢ J Bⱼᵀ.
 *  Kept numbers lie in the order in which the states arrived, whatever base they were computed on, so that reading them is a copy and a new
 *  base moves nothing: blocks one after another, each d × d; the block column by columns, `lead` numbers from one to the next. Two tables
 *  say where: `places` holds two i32 a slot, first f64 of its block and first row of the block column; `arrivals` the slots in that order.
 *  Source: Woodbury (1950); the additive form of the covariance update in sequential least squares (Plackett 1950). */
import { atF64, f64At, i32At, setF64, setI32, u32At } from "../memory/access";
import { factorPanel } from "../dense/factor-panel";
import { madd } from "../dense/madd";
import { inverseOfProduct } from "../dense/inverse-of-product";
import { solveLowerMany, solveLowerTransposedMany } from "../dense/solve-left";
import { solveRightTransposed } from "../dense/solve-right";
import { OK } from "../memory/status";
import { SelectedInverse } from "../inverse/selected-inverse";
import { One, Three, Two } from "../dense/tile";
import { Ledger, slotDimension } from "./ledger";

/** A pivot of 1 − a Σ aᵀ at most this is rounding noise (as in signed.ts). */
const PIVOT_FLOOR: f64 = 64 * f64.EPSILON;

/** The signed factor K of C + A Σ Aᵀ for the worked-on columns [0, plus + minus), plus first, from gram: lower triangle into schur,
 *  leading dimension plus + minus. After carryForward.  OK, or 1 + plus + the removed row that fails. */
export function factorInnovation(l: Ledger, plus: i32, minus: i32): i32 {
  const rows = plus + minus, k = l.columns, schur = l.schur, floors = l.buffer;
  for (let j = 0; j < rows; ++j) {
    for (let i = j; i < rows; ++i) {
      const value = f64At(l.gram, j * k + i);
      setF64(schur, j * rows + i, i == j ? (j < plus ? value + 1 : value - 1) : value);
    }
  }
  for (let q = 0; q < rows; ++q) setF64(floors, q, 0);
  const failed = factorPanel(rows, plus, schur, rows, floors, 0, plus); // its rows below are Mᵀ
  if (failed || !minus) return failed;
  const corner = atF64(schur, plus * rows + plus);
  for (let j = 0; j < minus; ++j) {
    for (let i = j; i < minus; ++i) {
      let sum = -f64At(corner, j * rows + i);
      for (let q = 0; q < plus; ++q) sum += f64At(schur, q * rows + plus + i) * f64At(schur, q * rows + plus + j);
      setF64(corner, j * rows + i, sum);
    }
    setF64(floors, j, PIVOT_FLOOR);
  }
  const stopped = factorPanel(minus, minus, corner, rows, floors, 0, minus);
  return stopped ? plus + stopped : OK;
}

/** Columns [0, rows) := themselves times K⁻ᵀ (schur), in x over its reach and in f, so that carryBack gives B. */
export function scaleColumns(l: Ledger, rows: i32): void {
  const s = l.factor.symbolic, k = l.side;
  for (let e = l.listFrom; e < s.supernodes; ++e) {
    const t = i32At(l.list, e), first = i32At(s.first, t);
    solveLowerMany(rows, i32At(s.first, t + 1) - first, l.schur, rows, atF64(l.x, first * k), k);
  }
  for (let leaf = 0; leaf <= l.lastLeaf; ++leaf) {
    if (!load<u8>(l.leafMark + leaf)) continue;
    const slot = l.baseSlots + leaf;
    solveLowerMany(rows, slotDimension(l, slot), l.schur, rows, atF64(l.x, i32At(l.slotPosition, slot) * k), k);
  }
  solveRightTransposed(l.added, rows, l.schur, rows, l.fAdded, l.addedRoom);
  solveRightTransposed(l.removed, rows, l.schur, rows, l.fRemoved, l.removedRoom);
}

// @ts-ignore: decorator
@inline function blockPlace(places: usize, slot: i32): i32 { return load<i32>(places + (<usize>slot << 3)); }
// @ts-ignore: decorator
@inline function rowPlace(places: usize, slot: i32): i32 { return load<i32>(places + (<usize>slot << 3), 4); }

/** blocks := blocks − B J Bᵀ for all slots, and column := column − B J Bₜᵀ with Bₜ the rows of B at slot `target` (−1: no column), after
 *  carryBack. fresh ≥ 0: the column is first taken from the worked-on columns fresh, fresh + 1 …, which were carried back from the
 *  target's units by what counted before the batch.
 *  largest f64 by arrival: the largest trace that a block has had; kept.  Returns the largest ratio of such a trace to the trace now.
 *  States are walked as they arrived: reads of B are scattered then, and writes are not. */
export function updateKept(
  l: Ledger, plus: i32, minus: i32, fresh: i32, target: i32, arrivals: usize, block: usize, largest: usize, column: usize, lead: i32,
): f64 {
  const side = l.side, rows = plus + minus, turned = l.buffer, across = target < 0 ? 0 : slotDimension(l, target);
  for (let j = 0; j < across; ++j) {
    const own = atF64(l.x, (i32At(l.slotPosition, target) + j) * side);
    for (let q = 0; q < rows; ++q) setF64(turned, j * rows + q, q < plus ? f64At(own, q) : -f64At(own, q));
  }
  const step = <usize>side << 3, stride = <usize>lead << 3;
  let ratio: f64 = 1;
  for (let rank = 0; rank < l.slots; ++rank, largest += 8) {
    const slot = i32At(arrivals, rank), d = slotDimension(l, slot), b = atF64(l.x, i32At(l.slotPosition, slot) * side);
    let trace: f64 = 0;
    for (let j = 0; j < d; ++j) trace += f64At(block, j * (d + 1));
    const past = max(load<f64>(largest), trace);
    store<f64>(largest, past);
    if (d == 1) trace = updateState<One>(1, b, step, plus, rows, fresh, across, turned, block, column, stride);
    else if (d == 2) trace = updateState<Two>(2, b, step, plus, rows, fresh, across, turned, block, column, stride);
    else if (d == 3) trace = updateState<Three>(3, b, step, plus, rows, fresh, across, turned, block, column, stride);
    else trace = updateState<Many>(d, b, step, plus, rows, fresh, across, turned, block, column, stride);
    if (!(past >= trace)) store<f64>(largest, trace);
    else if (!(past <= ratio * trace)) ratio = trace > 0 ? past / trace : Infinity;
    block += <usize>(d * d) << 3;
    column += <usize>d << 3;
  }
  return ratio;
}

/** column := the worked-on columns from, from + 1 … as they were carried back from the units of slot `target`. */
export function takeColumn(l: Ledger, from: i32, target: i32, arrivals: usize, column: usize, lead: i32): void {
  const side = <usize>l.side << 3, across = slotDimension(l, target), stride = <usize>lead << 3;
  for (let rank = 0; rank < l.slots; ++rank) {
    const slot = i32At(arrivals, rank);
    let b = l.x + <usize>i32At(l.slotPosition, slot) * side + (<usize>from << 3);
    for (let i = slotDimension(l, slot); i > 0; --i, b += side, column += 8) {
      let at = b, into = column;
      for (let c = across; c > 0; --c, at += 8, into += stride) store<f64>(into, load<f64>(at));
    }
  }
}

type Many = i64;

/** One state of updateKept; its trace afterwards. Dimensions up to three have their loops unrolled: they are nearly all. */
// @ts-ignore: decorator
@inline
function updateState<D>(
  d: i32, b: usize, step: usize, plus: i32, rows: i32, fresh: i32, across: i32, turned: usize, block: usize, into: usize, stride: usize,
): f64 {
  let trace: f64 = 0;
  if (sizeof<D>() == sizeof<Many>()) {
    for (let j = 0; j < d; ++j) {
      const bj = b + <usize>j * step;
      for (let i = j; i < d; ++i) {
        const bi = b + <usize>i * step;
        let sum: f64 = 0;
        for (let q = 0; q < plus; ++q) sum += f64At(bi, q) * f64At(bj, q);
        for (let q = plus; q < rows; ++q) sum -= f64At(bi, q) * f64At(bj, q);
        const value = f64At(block, j * d + i) - sum;
        setF64(block, j * d + i, value);
        setF64(block, i * d + j, value);
        if (i == j) trace += value;
      }
      for (let c = 0; c < across; ++c) {
        const at = into + <usize>c * stride + (<usize>j << 3), t = atF64(turned, c * rows);
        let sum: f64 = 0;
        for (let q = 0; q < rows; ++q) sum += f64At(bj, q) * f64At(t, q);
        store<f64>(at, (fresh < 0 ? load<f64>(at) : f64At(bj, fresh + c)) - sum);
      }
    }
    return trace;
  }
  const b1 = b + step, b2 = b1 + step;
  let s00: f64 = 0, s10: f64 = 0, s11: f64 = 0, s20: f64 = 0, s21: f64 = 0, s22: f64 = 0;
  for (let q = 0; q < rows; ++q) {
    const sign: f64 = q < plus ? 1 : -1, x = f64At(b, q), sx = sign * x;
    s00 += x * sx;
    if (sizeof<D>() >= sizeof<Two>()) {
      const y = f64At(b1, q), sy = sign * y;
      s10 += y * sx;
      s11 += y * sy;
      if (sizeof<D>() >= sizeof<Three>()) {
        const z = f64At(b2, q);
        s20 += z * sx;
        s21 += z * sy;
        s22 += z * sign * z;
      }
    }
  }
  trace = load<f64>(block) - s00;
  store<f64>(block, trace);
  if (sizeof<D>() >= sizeof<Two>()) {
    const low = f64At(block, 1) - s10, at = d + 1, next = f64At(block, at) - s11;
    setF64(block, 1, low);
    setF64(block, d, low);
    setF64(block, at, next);
    trace += next;
    if (sizeof<D>() >= sizeof<Three>()) {
      const corner = f64At(block, 2) - s20, edge = f64At(block, 5) - s21, last = f64At(block, 8) - s22;
      setF64(block, 2, corner);
      setF64(block, 6, corner);
      setF64(block, 5, edge);
      setF64(block, 7, edge);
      setF64(block, 8, last);
      trace += last;
    }
  }
  for (let c = 0; c < across; ++c, into += stride, turned += <usize>rows << 3) {
    s00 = s11 = s22 = 0;
    for (let q = 0; q < rows; ++q) {
      const t = f64At(turned, q);
      s00 += f64At(b, q) * t;
      if (sizeof<D>() >= sizeof<Two>()) s11 += f64At(b1, q) * t;
      if (sizeof<D>() >= sizeof<Three>()) s22 += f64At(b2, q) * t;
    }
    store<f64>(into, (fresh < 0 ? load<f64>(into) : f64At(b, fresh + c)) - s00);
    if (sizeof<D>() >= sizeof<Two>()) store<f64>(into, (fresh < 0 ? load<f64>(into, 8) : f64At(b1, fresh + c)) - s11, 8);
    if (sizeof<D>() >= sizeof<Three>()) store<f64>(into, (fresh < 0 ? load<f64>(into, 16) : f64At(b2, fresh + c)) - s22, 16);
  }
  return trace;
}

/** The block column of leaf `slot`, whose only parent is the state of the kept column, in the place of that column; and its diagonal block:
 *  column := −R⁻¹ G × the parent's column (`rows` rows), its own block R⁻¹ (I + G Σ_pp Gᵀ) R⁻ᵀ below it and in blocks.
 *  Room for `dimension` columns.  scratch f64[3 d² + d dp + 2 dp].  Cost: 2 d dp rows. */
export function followLeaf(l: Ledger, slot: i32, places: usize, blocks: usize, column: usize, lead: i32, rows: i32, scratch: usize): void {
  const d = slotDimension(l, slot), parent = i32At(l.parents, i32At(l.parentStart, slot)), dp = slotDimension(l, parent);
  const triangle = atF64(l.numbers, i32At(l.leafStart, slot)), turn = scratch, held = atF64(turn, d * dp);
  for (let k = 0; k < d * dp; ++k) setF64(turn, k, -f64At(triangle, d * d + k));
  solveLowerTransposedMany(d, dp, triangle, d, turn, d);
  const stride = <usize>lead << 3;
  turnColumn(d, dp, turn, column, stride, rows, held);
  // Its own block: (L Lᵀ)⁻¹ + turn Σ_pp turnᵀ, where the column at the parent is already turn Σ_pp.
  const own = atF64(held, 2 * dp), half = atF64(own, d * d), block = atF64(blocks, blockPlace(places, slot));
  inverseOfProduct(d, triangle, d, own, d, half);
  const at = atF64(column, rowPlace(places, parent));
  for (let i = 0; i < d; ++i) for (let j = 0; j < d; ++j) {
    let sum = f64At(own, i * d + j);
    for (let k = 0; k < dp; ++k) sum += load<f64>(at + <usize>j * stride + (<usize>k << 3)) * f64At(turn, k * d + i);
    setF64(half, i * d + j, sum);
  }
  const into = atF64(column, rowPlace(places, slot));
  for (let j = 0; j < d; ++j) for (let i = 0; i < d; ++i) {
    const value = 0.5 * (f64At(half, j * d + i) + f64At(half, i * d + j));
    setF64(block, j * d + i, value);
    store<f64>(into + <usize>j * stride + (<usize>i << 3), value);
  }
}

/** Rows of dp columns become rows of d columns: each is multiplied by turn (d × dp, column-major). held f64[2 dp]: two rows at a time. */
function turnColumn(d: i32, dp: i32, turn: usize, column: usize, stride: usize, rows: i32, held: usize): void {
  const end = column + (<usize>(rows & ~1) << 3);
  let at = column;
  if (d == 3 && dp == 3) {
    const t0 = v128.load64_splat(turn), t1 = v128.load64_splat(turn, 8), t2 = v128.load64_splat(turn, 16);
    const t3 = v128.load64_splat(turn, 24), t4 = v128.load64_splat(turn, 32), t5 = v128.load64_splat(turn, 40);
    const t6 = v128.load64_splat(turn, 48), t7 = v128.load64_splat(turn, 56), t8 = v128.load64_splat(turn, 64), second = stride << 1;
    for (; at != end; at += 16) {
      const x = v128.load(at), y = v128.load(at + stride), z = v128.load(at + second);
      v128.store(at, madd(z, t6, madd(y, t3, f64x2.mul(x, t0))));
      v128.store(at + stride, madd(z, t7, madd(y, t4, f64x2.mul(x, t1))));
      v128.store(at + second, madd(z, t8, madd(y, t5, f64x2.mul(x, t2))));
    }
  } else {
    for (; at != end; at += 16) {
      for (let k = 0; k < dp; ++k) v128.store(held + (<usize>k << 4), v128.load(at + <usize>k * stride));
      for (let j = 0; j < d; ++j) {
        let sum = f64x2.mul(v128.load(held), v128.load64_splat(turn + (<usize>j << 3)));
        for (let k = 1; k < dp; ++k) sum = madd(v128.load(held + (<usize>k << 4)), v128.load64_splat(atF64(turn, k * d + j)), sum);
        v128.store(at + <usize>j * stride, sum);
      }
    }
  }
  if (!(rows & 1)) return;
  for (let k = 0; k < dp; ++k) setF64(held, k, load<f64>(at + <usize>k * stride));
  for (let j = 0; j < d; ++j) {
    let sum: f64 = 0;
    for (let k = 0; k < dp; ++k) sum += f64At(held, k) * f64At(turn, k * d + j);
    store<f64>(at + <usize>j * stride, sum);
  }
}

/** The kept column at leaf `slot`, whose parents it holds already: −R⁻¹ Σ G_p × the column at the parents.  x f64[dimension]. */
export function extendColumn(l: Ledger, slot: i32, across: i32, places: usize, column: usize, lead: i32, x: usize): void {
  const d = slotDimension(l, slot), triangle = atF64(l.numbers, i32At(l.leafStart, slot));
  for (let c = 0; c < across; ++c, column += <usize>lead << 3) {
    let g = atF64(triangle, d * d);
    for (let i = 0; i < d; ++i) setF64(x, i, 0);
    for (let e = i32At(l.parentStart, slot), end = i32At(l.parentStart, slot + 1); e < end; ++e) {
      const parent = i32At(l.parents, e), from = atF64(column, rowPlace(places, parent));
      for (let u = 0, dp = slotDimension(l, parent); u < dp; ++u, g += <usize>d << 3) {
        for (let i = 0; i < d; ++i) setF64(x, i, f64At(x, i) - f64At(g, i) * f64At(from, u));
      }
    }
    solveLowerTransposedMany(d, 1, triangle, d, x, d);
    memory.copy(atF64(column, rowPlace(places, slot)), x, <usize>d << 3);
  }
}

/** blocks := the diagonal blocks of Σ out of the kept panels of a selected inverse of the base. For a ledger without leaves and rows. */
export function blocksOfInverse(l: Ledger, z: SelectedInverse, places: usize, blocks: usize): void {
  const s = l.factor.symbolic;
  for (let slot = 0; slot < l.slots; ++slot) {
    const first = i32At(l.slotPosition, slot), d = slotDimension(l, slot), t = i32At(s.supernodeOf, first), block = atF64(blocks, blockPlace(places, slot));
    const lead = i32At(s.lead, t), at = z.panels + (<usize>u32At(s.panel, t) << 3) + (<usize>((first - i32At(s.first, t)) * (lead + 1)) << 3);
    for (let j = 0; j < d; ++j) for (let i = 0; i < d; ++i) setF64(block, j * d + i, f64At(at, (i >= j ? j * lead + i : i * lead + j)));
  }
}

/** The largest trace of each block, by arrival, is its trace now. */
export function forgetPast(l: Ledger, arrivals: usize, block: usize, largest: usize): void {
  for (let rank = 0; rank < l.slots; ++rank, largest += 8) {
    const d = slotDimension(l, i32At(arrivals, rank));
    let trace: f64 = 0;
    for (let j = 0; j < d; ++j) trace += f64At(block, j * (d + 1));
    store<f64>(largest, trace);
    block += <usize>(d * d) << 3;
  }
}

/** Lists the ranks of states whose largest past trace passes `limit` times the present one, as many as `room` holds; returns how many there
 *  are. */
export function suspectStates(l: Ledger, arrivals: usize, block: usize, largest: usize, limit: f64, list: usize, room: i32): i32 {
  let count = 0;
  for (let rank = 0; rank < l.slots; ++rank, largest += 8) {
    const d = slotDimension(l, i32At(arrivals, rank));
    let trace: f64 = 0;
    for (let j = 0; j < d; ++j) trace += f64At(block, j * (d + 1));
    if (!(load<f64>(largest) <= limit * trace)) {
      if (count < room) setI32(list, count, rank);
      ++count;
    }
    block += <usize>(d * d) << 3;
  }
  return count;
}
