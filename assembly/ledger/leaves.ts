/** Leaves: states that came after the base, eliminated before everything older.
 *  Rotated rows  R x + G x_parents = z  define the new state given older ones; with L = Rᵀ they are a supernode of their own, whose
 *  rows below are the parents' unknowns (Gᵀ). Leaves are walked newest first going forward, oldest first going back.
 *  Source: the square-root form of sequential least squares; Golub, Van Loan, "Matrix Computations", section 5.3; Bierman,
 *  "Factorization Methods for Discrete Sequential Estimation" (1977), ch. 4. */
import { atF64, atI32, i32At, setI32 } from "../memory/access";
import { release } from "../memory/heap";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { multiply } from "../dense/multiply";
import { solveRight, solveRightTransposed } from "../dense/solve-right";
import { SUBTRACT } from "../dense/mode";
import { leaves, Ledger, regrow, reserveNodes, reserveSlots, slotDimension } from "./ledger";

/** Adds a state of `dimension` unknowns as the newest leaf. parents i32[count]: distinct slots of older states; numbers f64: L = Rᵀ
 *  (d × d, lower, column-major), then G of each parent (d × its dimension, column-major); z f64[d].
 *  OK, or OUT_OF_MEMORY with nothing changed.  The new slot is the last. */
export function addLeaf(l: Ledger, dimension: i32, count: i32, parents: usize, numbers: usize, z: usize): i32 {
  let size = dimension * dimension;
  for (let k = 0; k < count; ++k) size += dimension * slotDimension(l, i32At(parents, k));
  if (reserveSlots(l, l.slots + 1, l.positions + dimension) != OK) return OUT_OF_MEMORY;
  if (reserveNodes(l, l.factor.symbolic.supernodes + leaves(l) + 1) != OK) return OUT_OF_MEMORY;
  if (l.parentCount + count > l.parentRoom) {
    const room = 2 * (l.parentCount + count) + 32, at = regrow(l.parents, <f64>l.parentCount, <f64>room, 2);
    if (!at) return OUT_OF_MEMORY;
    l.parents = at;
    l.parentRoom = room;
  }
  if (l.numberCount + size > l.numberRoom) {
    const room = 2 * (l.numberCount + size) + 64, at = regrow(l.numbers, <f64>l.numberCount, <f64>room, 3);
    if (!at) return OUT_OF_MEMORY;
    l.numbers = at;
    l.numberRoom = room;
  }
  memory.copy(atI32(l.parents, l.parentCount), parents, <usize>count << 2);
  memory.copy(atF64(l.numbers, l.numberCount), numbers, <usize>size << 3);
  memory.copy(atF64(l.y, l.positions), z, <usize>dimension << 3);
  setI32(l.parentStart, l.slots, l.parentCount);
  setI32(l.leafStart, l.slots, l.numberCount);
  l.parentCount += count;
  l.numberCount += size;
  l.slots += 1;
  l.positions += dimension;
  setI32(l.parentStart, l.slots, l.parentCount);
  setI32(l.slotPosition, l.slots, l.positions);
  return OK;
}

/** Takes the newest leaves away until `slots` slots are left. They must have no row in the ledger. Room that rows which were entered and
 *  withdrawn had taken at them goes too: the next leaf may be wider. */
export function dropLeaves(l: Ledger, slots: i32): void {
  assert(slots >= l.baseSlots);
  if (slots >= l.slots) return;
  for (let slot = slots; slot < l.slots; ++slot) {
    const chunk = l.chunks + <usize>(12 * (l.factor.symbolic.supernodes + slot - l.baseSlots));
    assert(load<i32>(chunk, 4) == 0);
    l.chunkBytes -= <f64>load<i32>(chunk, 8) * <f64>(4 + 8 * slotDimension(l, slot));
    release(load<u32>(chunk));
    memory.fill(chunk, 0, 12);
  }
  l.parentCount = i32At(l.parentStart, slots);
  l.numberCount = i32At(l.leafStart, slots);
  l.positions = i32At(l.slotPosition, slots);
  l.slots = slots;
}

/** X := L_leaf⁻¹ X through all marked leaves, newest first; marks the parents reached, and calls for the base by `reachBase`. */
export function forwardLeaves(l: Ledger, reachBase: (l: Ledger, slot: i32) => void): void {
  const k = l.side, x = l.x, base = l.baseSlots;
  for (let leaf = l.lastLeaf; leaf >= 0; --leaf) {
    if (!load<u8>(l.leafMark + leaf)) continue;
    const slot = base + leaf, d = slotDimension(l, slot);
    const own = atF64(x, i32At(l.slotPosition, slot) * k);
    let numbers = atF64(l.numbers, i32At(l.leafStart, slot));
    solveRightTransposed(k, d, numbers, d, own, k);
    numbers += <usize>(d * d) << 3;
    for (let e = i32At(l.parentStart, slot), end = i32At(l.parentStart, slot + 1); e < end; ++e) {
      const parent = i32At(l.parents, e), dp = slotDimension(l, parent);
      if (parent >= base) store<u8>(l.leafMark + (parent - base), 1); else reachBase(l, parent);
      multiply(k, dp, d, own, k, numbers, 1, d, atF64(x, i32At(l.slotPosition, parent) * k), k, SUBTRACT);
      numbers += <usize>(d * dp) << 3;
    }
  }
}

/** X := L_leaf⁻ᵀ X, oldest first, after the base has been solved. all: every leaf; else only the marked ones. */
export function backwardLeaves(l: Ledger, all: bool): void {
  const k = l.side, x = l.x, base = l.baseSlots;
  for (let leaf = 0, end = all ? leaves(l) : l.lastLeaf + 1; leaf < end; ++leaf) {
    if (!all && !load<u8>(l.leafMark + leaf)) continue;
    const slot = base + leaf, d = slotDimension(l, slot);
    const own = atF64(x, i32At(l.slotPosition, slot) * k), triangle = atF64(l.numbers, i32At(l.leafStart, slot));
    let numbers = triangle + (<usize>(d * d) << 3);
    for (let e = i32At(l.parentStart, slot), last = i32At(l.parentStart, slot + 1); e < last; ++e) {
      const parent = i32At(l.parents, e), dp = slotDimension(l, parent);
      multiply(k, d, dp, atF64(x, i32At(l.slotPosition, parent) * k), k, numbers, d, 1, own, k, SUBTRACT);
      numbers += <usize>(d * dp) << 3;
    }
    solveRight(k, d, triangle, d, own, k);
  }
}
