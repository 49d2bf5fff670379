/** Marginals kept current: the diagonal blocks of Σ and one block column of it, changed by what a batch of rows changes.
 *  With W = Σ Aᵀ before the batch and its signed factor  C + A Σ Aᵀ = K J Kᵀ,  B = W K⁻ᵀ:
 *      Σᵢⱼ' = Σᵢⱼ − Bᵢ J Bⱼᵀ.
 *  Blocks lie one after another by slot, each d × d; the column lies as columns do, its `across` entries side by side for each position.
 *  Source: Woodbury (1950); the additive form of the covariance update in sequential least squares (Plackett 1950). */
import { atF64, f64At, i32At, setF64, u32At } from "../memory/access";
import { factorPanel } from "../dense/factor-panel";
import { multiply } from "../dense/multiply";
import { inverseOfProduct, inverseScratch } from "../dense/inverse-of-product";
import { solveLowerMany, solveLowerTransposedMany } from "../dense/solve-left";
import { solveRightTransposed } from "../dense/solve-right";
import { ADD, ASSIGN, SUBTRACT } from "../dense/mode";
import { OK } from "../memory/status";
import { SelectedInverse } from "../inverse/selected-inverse";
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

/** blocks := blocks − B J Bᵀ for slots [from, to); `block` is the address of slot `from`'s. largest f64 by slot: the largest trace that
 *  a block has had since it was computed afresh; kept. */
export function updateBlocks(l: Ledger, plus: i32, minus: i32, from: i32, to: i32, block: usize): void {
  const k = l.side;
  for (let slot = from; slot < to; ++slot) {
    const d = slotDimension(l, slot), b = atF64(l.x, i32At(l.slotPosition, slot) * k);
    for (let j = 0; j < d; ++j) {
      const bj = atF64(b, j * k);
      for (let i = j; i < d; ++i) {
        const bi = atF64(b, i * k);
        let sum: f64 = 0;
        for (let q = 0; q < plus; ++q) sum += f64At(bi, q) * f64At(bj, q);
        for (let q = plus; q < plus + minus; ++q) sum -= f64At(bi, q) * f64At(bj, q);
        const value = f64At(block, j * d + i) - sum;
        setF64(block, j * d + i, value);
        setF64(block, i * d + j, value);
      }
    }
    block += <usize>(d * d) << 3;
  }
}

/** Largest ratio, over slots, of the largest trace a block has had to its trace now; `largest` f64[slots] is brought up to date. */
export function traceRatio(l: Ledger, blocks: usize, largest: usize): f64 {
  let ratio: f64 = 1;
  for (let slot = 0; slot < l.slots; ++slot) {
    const d = slotDimension(l, slot);
    let trace: f64 = 0;
    for (let j = 0; j < d; ++j) trace += f64At(blocks, j * (d + 1));
    const past = f64At(largest, slot);
    if (!(past >= trace)) setF64(largest, slot, trace);
    else if (!(past <= ratio * trace)) ratio = trace > 0 ? past / trace : Infinity;
    blocks += <usize>(d * d) << 3;
  }
  return ratio;
}

/** column (across × positions) := column − (B's rows at `slot`)ᵀ J B: the block column of the state in `slot` after the batch. */
export function updateColumn(l: Ledger, plus: i32, minus: i32, slot: i32, column: usize): void {
  const k = l.side, across = slotDimension(l, slot), own = atF64(l.x, i32At(l.slotPosition, slot) * k), turned = l.buffer;
  for (let q = 0; q < plus + minus; ++q) {
    for (let j = 0; j < across; ++j) setF64(turned, q * across + j, f64At(own, j * k + q) * (q < plus ? 1 : -1));
  }
  multiply(across, l.positions, plus + minus, turned, across, l.x, 1, k, column, across, SUBTRACT);
}

/** column := the worked-on columns [from, from + dimension of slot), carried back: Σ before the batch at the units of `slot`. */
export function takeColumn(l: Ledger, from: i32, slot: i32, column: usize): void {
  const k = l.side, across = slotDimension(l, slot);
  for (let p = 0; p < l.positions; ++p) {
    for (let j = 0; j < across; ++j) setF64(column, p * across + j, f64At(l.x, p * k + from + j));
  }
}

/** The block column and the diagonal block of leaf `slot` from those of its only parent: next (across × positions) :=
 *  −R⁻¹ G × parent's column, its own block R⁻¹ (I + G Σ_pp Gᵀ) R⁻ᵀ at its positions and in `block`. scratch f64[4 d²+ 2 d dp]. */
export function leafColumn(l: Ledger, slot: i32, column: usize, next: usize, block: usize, scratch: usize): void {
  const d = slotDimension(l, slot), parent = i32At(l.parents, i32At(l.parentStart, slot)), dp = slotDimension(l, parent);
  const triangle = atF64(l.numbers, i32At(l.leafStart, slot)), turn = scratch, half = atF64(scratch, d * dp);
  for (let k = 0; k < d * dp; ++k) setF64(turn, k, -f64At(triangle, d * d + k));
  solveLowerTransposedMany(d, dp, triangle, d, turn, d);
  const first = i32At(l.slotPosition, slot);
  multiply(d, first, dp, turn, d, column, 1, dp, next, d, ASSIGN);
  // Its own block: (L Lᵀ)⁻¹ + turn Σ_pp turnᵀ, where next at the parent is already turn Σ_pp.
  const own = atF64(next, first * d);
  inverseOfProduct(d, triangle, d, own, d, half);
  multiply(d, d, dp, atF64(next, i32At(l.slotPosition, parent) * d), d, turn, d, 1, own, d, ADD);
  for (let j = 0; j < d; ++j) for (let i = 0; i < d; ++i) {
    const value = 0.5 * (f64At(own, j * d + i) + f64At(own, i * d + j));
    setF64(block, j * d + i, value);
  }
  memory.copy(own, block, <usize>(d * d) << 3);
}

/** blocks := the diagonal blocks of Σ out of the kept panels of a selected inverse of the base, slot by slot. For a ledger without leaves
 *  and rows. */
export function blocksOfInverse(l: Ledger, z: SelectedInverse, blocks: usize): void {
  const s = l.factor.symbolic;
  for (let slot = 0; slot < l.slots; ++slot) {
    const first = i32At(l.slotPosition, slot), d = slotDimension(l, slot), t = i32At(s.supernodeOf, first);
    const lead = i32At(s.lead, t), at = z.panels + (<usize>u32At(s.panel, t) << 3) + (<usize>((first - i32At(s.first, t)) * (lead + 1)) << 3);
    for (let j = 0; j < d; ++j) for (let i = 0; i < d; ++i) setF64(blocks, j * d + i, f64At(at, (i >= j ? j * lead + i : i * lead + j)));
    blocks += <usize>(d * d) << 3;
  }
}
