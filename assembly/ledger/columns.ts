/** Columns being worked on: loaded as rows A of a measurement (Aᵀ by position) or as unit columns of a state, carried forward over
 *  their reach, compared with the ledger, kept in it, or carried back to columns of Σ.
 *  What one forward pass gives:  A Σ Aᵀ = Xᵀ X − fᵀ J f  and  A x = Xᵀ y + fᵀ J h  with X = L⁻¹ Aᵀ, f = K⁻¹ Vᵀ X: the covariance and the
 *  value of any linear function of the states, without a backward solve.
 *  Sources: Gilbert, Peierls (1988) for the reach; Woodbury (1950). */
import { allocateArray, release } from "../memory/heap";
import { atF64, f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { multiply } from "../dense/multiply";
import { rankUpdateLower } from "../dense/rank-update";
import { mirror } from "../dense/transpose";
import { ADD, ASSIGN, SUBTRACT } from "../dense/mode";
import { addPath } from "../solve/reach";
import { backwardSolve, forwardSolve, gatherRoom, stride } from "../solve/triangular";
import { backwardLeaves, forwardLeaves } from "./leaves";
import { leaves, Ledger, regrow, slotDimension } from "./ledger";
import { solveSigned, weighSigned } from "./signed";

/** Makes room for `columns` right-hand sides and forgets those before. OK or OUT_OF_MEMORY. Call it first; then load. */
export function beginColumns(l: Ledger, columns: i32): i32 {
  const side = stride(columns), need = <f64>side * <f64>l.positions;
  clearColumns(l);
  if (need > l.xRoom) {
    const room = need + <f64>(side * (l.positionRoom - l.positions)), x = regrow(l.x, 0, room, 3);
    if (!x) return OUT_OF_MEMORY;
    memory.fill(x, 0, <usize>room << 3);
    l.x = x;
    l.xRoom = room;
  }
  if (reserveBuffer(l, columns) != OK) return OUT_OF_MEMORY;
  if (columns > l.fColumns) {
    const added = allocateArray(2 * <f64>columns * <f64>l.addedRoom, 3), removed = allocateArray(2 * <f64>columns * <f64>l.removedRoom, 3);
    if (!added || !removed) { release(added); release(removed); return OUT_OF_MEMORY; }
    release(l.fAdded);
    release(l.fRemoved);
    placeComparisons(l, added, removed, columns);
  }
  if (columns > l.gramRoom) {
    const gram = allocateArray(3 * <f64>columns * <f64>columns, 3);
    if (!gram) return OUT_OF_MEMORY;
    release(l.gram);
    l.gram = gram;
    l.ownGram = atF64(gram, columns * columns);
    l.schur = atF64(gram, 2 * columns * columns);
    l.gramRoom = columns;
  }
  l.columns = columns;
  l.side = side;
  return OK;
}

/** Room to gather `columns` columns at the rows below a supernode, and at all rows that a chunk may hold, whether they count or not. */
export function reserveBuffer(l: Ledger, columns: i32): i32 {
  const s = l.factor.symbolic, room = gatherRoom(s, columns) + <f64>columns * <f64>(l.addedRoom + l.removedRoom);
  if (room <= l.bufferRoom) return OK;
  const buffer = regrow(l.buffer, 0, 2 * room, 3);
  if (!buffer) return OUT_OF_MEMORY;
  l.buffer = buffer;
  l.bufferRoom = 2 * room;
  return OK;
}

/** Places f and c in their blocks. */
export function placeComparisons(l: Ledger, added: usize, removed: usize, columns: i32): void {
  l.fAdded = added;
  l.fRemoved = removed;
  l.cAdded = atF64(added, columns * l.addedRoom);
  l.cRemoved = atF64(removed, columns * l.removedRoom);
  l.fColumns = columns;
}

function reachBase(l: Ledger, slot: i32): void {
  const s = l.factor.symbolic;
  l.listFrom = addPath(s, i32At(s.supernodeOf, i32At(l.slotPosition, slot)), l.list, l.listFrom, l.mark);
}

function touch(l: Ledger, slot: i32): void {
  const leaf = slot - l.baseSlots;
  if (leaf < 0) { reachBase(l, slot); return; }
  store<u8>(l.leafMark + leaf, 1);
  if (leaf > l.lastLeaf) l.lastLeaf = leaf;
}

/** Adds a block of Aᵀ to columns [from, from + rows): block f64[rows × dimension], column-major (the rows of one unknown side by
 *  side), for the state in `slot`. */
export function loadBlock(l: Ledger, from: i32, rows: i32, slot: i32, block: usize): void {
  const first = i32At(l.slotPosition, slot), d = slotDimension(l, slot), k = l.side;
  for (let u = 0; u < d; ++u) {
    const x = atF64(l.x, (first + u) * k + from);
    for (let q = 0; q < rows; ++q) setF64(x, q, f64At(x, q) + f64At(block, u * rows + q));
  }
  touch(l, slot);
}

/** Adds the unit columns of the state in `slot` to columns from … from + dimension − 1. */
export function loadUnits(l: Ledger, from: i32, slot: i32): void {
  const first = i32At(l.slotPosition, slot), d = slotDimension(l, slot), k = l.side;
  for (let u = 0; u < d; ++u) setF64(l.x, (first + u) * k + from + u, 1);
  touch(l, slot);
}

/** Sets the base's part of y = L⁻¹ η from η f64[base positions], in elimination order. OK or OUT_OF_MEMORY. */
export function setRight(l: Ledger, eta: usize): i32 {
  if (beginColumns(l, 1) != OK) return OUT_OF_MEMORY;
  memory.copy(l.y, eta, <usize>l.basePositions << 3);
  forwardSolve(l.factor, l.y, 1, 0, 0, l.factor.symbolic.supernodes, l.buffer);
  return OK;
}

/** Sets it as it is, y f64[base positions], elimination order. */
export function setTurned(l: Ledger, y: usize): void {
  memory.copy(l.y, y, <usize>l.basePositions << 3);
}

/** X := L⁻¹ X over the reach; f = K⁻¹ Vᵀ X; gram := A Σ Aᵀ, both triangles. */
export function carryForward(l: Ledger): void {
  const k = l.columns;
  forwardLeaves(l, reachBase);
  forwardSolve(l.factor, l.x, k, l.list, l.listFrom, l.factor.symbolic.supernodes, l.buffer);
  memory.fill(l.ownGram, 0, <usize>(k * k) << 3);
  memory.fill(l.cAdded, 0, <usize>(k * l.addedRoom) << 3);
  memory.fill(l.cRemoved, 0, <usize>(k * l.removedRoom) << 3);
  visitNodes(l, compareNode);
  mirror(k, l.ownGram, k);
  memory.copy(l.gram, l.ownGram, <usize>(k * k) << 3);
  memory.copy(l.fAdded, l.cAdded, <usize>(k * l.addedRoom) << 3);
  memory.copy(l.fRemoved, l.cRemoved, <usize>(k * l.removedRoom) << 3);
  solveSigned(l, l.fAdded, l.fRemoved, k);
  if (l.added) subtractGram(l, l.added, l.fAdded, l.addedRoom, -1);
  if (l.removed) subtractGram(l, l.removed, l.fRemoved, l.removedRoom, 1);
  mirror(k, l.gram, k);
}

/** gram += sign · fᵀ f, lower triangle. */
function subtractGram(l: Ledger, rows: i32, f: usize, room: i32, sign: f64): void {
  const k = l.columns;
  for (let j = 0; j < k; ++j) {
    for (let i = j; i < k; ++i) {
      let sum: f64 = 0;
      const a = atF64(f, i * room), b = atF64(f, j * room);
      for (let q = 0; q < rows; ++q) sum += f64At(a, q) * f64At(b, q);
      const at = j * k + i;
      setF64(l.gram, at, f64At(l.gram, at) + sign * sum);
    }
  }
}

/** Calls for each node that x touches: its first entry of x, its width, its chunk. */
function visitNodes(l: Ledger, visit: (l: Ledger, x: usize, width: i32, node: i32) => void): void {
  const s = l.factor.symbolic, k = l.side;
  for (let e = l.listFrom; e < s.supernodes; ++e) {
    const t = i32At(l.list, e), first = i32At(s.first, t);
    visit(l, atF64(l.x, first * k), i32At(s.first, t + 1) - first, t);
  }
  for (let leaf = 0; leaf <= l.lastLeaf; ++leaf) {
    if (!load<u8>(l.leafMark + leaf)) continue;
    const slot = l.baseSlots + leaf;
    visit(l, atF64(l.x, i32At(l.slotPosition, slot) * k), slotDimension(l, slot), s.supernodes + leaf);
  }
}

// @ts-ignore: decorator
@inline function chunkOf(l: Ledger, node: i32): usize { return l.chunks + <usize>(12 * node); }
/** First f64 of a chunk's numbers; ids come before, padded to a multiple of 8 bytes by even room. */
// @ts-ignore: decorator
@inline function chunkNumbers(chunk: usize): usize { return load<u32>(chunk) + (<usize>load<i32>(chunk, 8) << 2); }

function compareNode(l: Ledger, x: usize, width: i32, node: i32): void {
  const k = l.columns, chunk = chunkOf(l, node), count = load<i32>(chunk, 4);
  rankUpdateLower(k, width, x, l.side, l.ownGram, k, ADD);
  l.flops += <f64>k * (2 * nodeEntries(l, node, width) + <f64>width * <f64>(k + 2 * count));
  if (!count) return;
  multiply(count, k, width, chunkNumbers(chunk), load<i32>(chunk, 8), x, l.side, 1, l.buffer, count, ASSIGN);
  const ids: usize = load<u32>(chunk);
  for (let q = 0; q < count; ++q) {
    const id = i32At(ids, q);
    let from = atF64(l.buffer, q), into = id >= 0 ? atF64(l.cAdded, id) : atF64(l.cRemoved, ~id);
    const stride = <usize>(id >= 0 ? l.addedRoom : l.removedRoom) << 3;
    for (let j = 0; j < k; ++j, from += <usize>count << 3, into += stride) store<f64>(into, load<f64>(into) + load<f64>(from));
  }
}

/** value f64[columns] := A x, the estimate of the loaded linear functions. After carryForward. */
export function columnValues(l: Ledger, value: usize): void {
  baseValues(l, value);
  for (let j = 0; j < l.columns; ++j) {
    let sum = f64At(value, j);
    for (let q = 0; q < l.added; ++q) sum += f64At(l.fAdded, j * l.addedRoom + q) * f64At(l.hAdded, q);
    for (let q = 0; q < l.removed; ++q) sum -= f64At(l.fRemoved, j * l.removedRoom + q) * f64At(l.hRemoved, q);
    setF64(value, j, sum);
  }
}

/** value f64[columns] := Xᵀ y, what the loaded functions come to without the ledger. */
export function baseValues(l: Ledger, value: usize): void {
  const k = l.columns, s = l.factor.symbolic;
  memory.fill(value, 0, <usize>k << 3);
  for (let e = l.listFrom; e < s.supernodes; ++e) {
    const t = i32At(l.list, e), first = i32At(s.first, t);
    multiply(k, 1, i32At(s.first, t + 1) - first, atF64(l.x, first * l.side), l.side, atF64(l.y, first), 1, 0, value, k, ADD);
  }
  for (let leaf = 0; leaf <= l.lastLeaf; ++leaf) {
    if (!load<u8>(l.leafMark + leaf)) continue;
    const slot = l.baseSlots + leaf, first = i32At(l.slotPosition, slot);
    multiply(k, 1, slotDimension(l, slot), atF64(l.x, first * l.side), l.side, atF64(l.y, first), 1, 0, value, k, ADD);
  }
}

/** Makes room for `rows` more rows in the chunk of each node that x touches. OK or OUT_OF_MEMORY (chunks may have grown, nothing else). */
export function reserveChunks(l: Ledger, rows: i32): i32 {
  chunkRows = rows;
  chunkFailed = false;
  visitNodes(l, reserveChunk);
  return chunkFailed ? OUT_OF_MEMORY : OK;
}
let chunkRows: i32 = 0, chunkFailed: bool = false, chunkId: i32 = 0, chunkFrom: i32 = 0;

function reserveChunk(l: Ledger, x: usize, width: i32, node: i32): void {
  const chunk = chunkOf(l, node), count = load<i32>(chunk, 4), room = load<i32>(chunk, 8);
  if (count + chunkRows <= room || chunkFailed) return;
  const next = (count + chunkRows + (count >> 2) + 3) & ~1;
  const bytes = <f64>next * <f64>(4 + 8 * width), address = allocateArray(bytes, 0);
  if (!address) { chunkFailed = true; return; }
  if (count) {
    memory.copy(address, load<u32>(chunk), <usize>count << 2);
    const from = chunkNumbers(chunk), into = address + (<usize>next << 2);
    for (let u = 0; u < width; ++u) memory.copy(atF64(into, u * next), atF64(from, u * room), <usize>count << 3);
  }
  release(load<u32>(chunk));
  l.chunkBytes += bytes - <f64>room * <f64>(4 + 8 * width);
  store<u32>(chunk, <u32>address);
  store<i32>(chunk, next, 8);
}

/** Keeps columns [from, from + rows) of x in the chunks, with ids `id`, `id` + 1 … (removed rows: ~0, ~1 … as given by ~id). */
export function keepColumns(l: Ledger, from: i32, rows: i32, id: i32): void {
  chunkRows = rows;
  chunkFrom = from;
  chunkId = id;
  visitNodes(l, keepChunk);
}

function keepChunk(l: Ledger, x: usize, width: i32, node: i32): void {
  const chunk = chunkOf(l, node), count = load<i32>(chunk, 4), room = load<i32>(chunk, 8), k = l.side;
  const numbers = chunkNumbers(chunk), ids: usize = load<u32>(chunk);
  for (let q = 0; q < chunkRows; ++q) {
    setI32(ids, count + q, chunkId >= 0 ? chunkId + q : chunkId - q);
    for (let u = 0; u < width; ++u) setF64(numbers, u * room + count + q, f64At(x, u * k + chunkFrom + q));
  }
  store<i32>(chunk, count + chunkRows, 4);
  l.chunkEntries += <f64>chunkRows * <f64>width;
}

/** Takes ledger row `id` out of all chunks; later rows of the same sign move up by one. */
export function forgetColumn(l: Ledger, id: i32): void {
  const s = l.factor.symbolic;
  for (let node = 0, end = s.supernodes + leaves(l); node < end; ++node) {
    const chunk = chunkOf(l, node), room = load<i32>(chunk, 8), ids: usize = load<u32>(chunk);
    let count = load<i32>(chunk, 4);
    for (let q = 0; q < count; ++q) {
      const other = i32At(ids, q);
      if ((other ^ id) < 0) continue; // of the other sign
      if (other == id) {
        --count;
        setI32(ids, q, i32At(ids, count));
        const numbers = chunkNumbers(chunk), width = nodeWidth(l, node);
        for (let u = 0; u < width; ++u) setF64(numbers, u * room + q, f64At(numbers, u * room + count));
        store<i32>(chunk, count, 4);
        l.chunkEntries -= <f64>width;
        --q;
      } else if (id >= 0 ? other > id : other < id) setI32(ids, q, other + (id >= 0 ? -1 : 1));
    }
  }
}

/** Takes rows with ids from `added` on (sign +1) and from `removed` on (sign −1, counting down) out of all chunks: the last ones there. */
export function trimColumns(l: Ledger, added: i32, removed: i32): void {
  for (let node = 0, end = l.factor.symbolic.supernodes + leaves(l); node < end; ++node) {
    const chunk = chunkOf(l, node), ids: usize = load<u32>(chunk);
    let count = load<i32>(chunk, 4);
    while (count > 0) {
      const id = i32At(ids, count - 1);
      if (id >= 0 ? id < added : id > removed) break;
      --count;
      l.chunkEntries -= <f64>nodeWidth(l, node);
    }
    store<i32>(chunk, count, 4);
  }
}

/** Entries of L in a node: its panel, or a leaf's triangle and parents. */
function nodeEntries(l: Ledger, node: i32, width: i32): f64 {
  const s = l.factor.symbolic;
  if (node < s.supernodes) return <f64>width * <f64>i32At(s.lead, node);
  const slot = l.baseSlots + node - s.supernodes, end = slot + 1 < l.slots ? i32At(l.leafStart, slot + 1) : l.numberCount;
  return <f64>(end - i32At(l.leafStart, slot));
}

function nodeWidth(l: Ledger, node: i32): i32 {
  const s = l.factor.symbolic;
  if (node < s.supernodes) return i32At(s.first, node + 1) - i32At(s.first, node);
  return slotDimension(l, l.baseSlots + node - s.supernodes);
}

/** X := X − V S⁻¹ Vᵀ X, given K⁻ᵀ J f in fAdded, fRemoved: what a backward solve turns into columns of Σ.
 *  all: at every node that V touches; else only at those on x's list. */
function combine(l: Ledger, all: bool): void {
  if (!all) { visitNodes(l, combineNode); return; }
  const s = l.factor.symbolic, k = l.side;
  for (let t = 0; t < s.supernodes; ++t) {
    if (!load<i32>(chunkOf(l, t), 4)) continue;
    const first = i32At(s.first, t);
    combineNode(l, atF64(l.x, first * k), i32At(s.first, t + 1) - first, t);
  }
  for (let leaf = 0, end = leaves(l); leaf < end; ++leaf) {
    if (!load<i32>(chunkOf(l, s.supernodes + leaf), 4)) continue;
    const slot = l.baseSlots + leaf;
    combineNode(l, atF64(l.x, i32At(l.slotPosition, slot) * k), slotDimension(l, slot), s.supernodes + leaf);
  }
}

function combineNode(l: Ledger, x: usize, width: i32, node: i32): void {
  const k = l.columns, chunk = chunkOf(l, node), count = load<i32>(chunk, 4), ids: usize = load<u32>(chunk);
  if (!count) return;
  l.flops += 2 * <f64>k * <f64>width * <f64>count;
  for (let q = 0; q < count; ++q) {
    const id = i32At(ids, q);
    let from = id >= 0 ? atF64(l.fAdded, id) : atF64(l.fRemoved, ~id);
    const stride = <usize>(id >= 0 ? l.addedRoom : l.removedRoom) << 3;
    for (let j = 0; j < k; ++j, from += stride) setF64(l.buffer, q * k + j, load<f64>(from));
  }
  multiply(k, width, count, l.buffer, k, chunkNumbers(chunk), 1, load<i32>(chunk, 8), x, l.side, SUBTRACT);
}

/** Loads the ledger's added rows from `since` on, as they stand in the chunks (L⁻¹ Aᵀ already), into columns [0, added − since), with
 *  f = K⁻¹ Vᵀ X as seen by the rows before, which is the border of K, and schur = the corner of K, so that after scaleColumns and
 *  carryBack they are B of the batch that came since.  Requires that nothing is removed and that only rows before `since` count now
 *  (countAdded); other columns may have been carried forward before. */
export function loadKept(l: Ledger, since: i32, rows: i32): void {
  const s = l.factor.symbolic, side = l.side, ld = l.addedRoom;
  for (let node = 0, end = s.supernodes + leaves(l); node < end; ++node) {
    const chunk = chunkOf(l, node), count = load<i32>(chunk, 4), room = load<i32>(chunk, 8), ids: usize = load<u32>(chunk);
    if (!count || i32At(ids, count - 1) < since) continue; // ids ascend while nothing is removed
    const slot = l.baseSlots + node - s.supernodes, isLeaf = node >= s.supernodes;
    const first = isLeaf ? i32At(l.slotPosition, slot) : i32At(s.first, node), width = nodeWidth(l, node), numbers = chunkNumbers(chunk);
    if (isLeaf) touch(l, slot); else l.listFrom = addPath(s, node, l.list, l.listFrom, l.mark);
    for (let q = count - 1; q >= 0 && i32At(ids, q) >= since; --q) {
      const column = i32At(ids, q) - since;
      for (let u = 0; u < width; ++u) setF64(l.x, (first + u) * side + column, f64At(numbers, u * room + q));
    }
  }
  for (let q = 0; q < rows; ++q) {
    for (let i = 0; i < since; ++i) setF64(l.fAdded, q * ld + i, f64At(l.kAdded, i * ld + since + q));
    for (let i = q; i < rows; ++i) setF64(l.schur, q * rows + i, f64At(l.kAdded, (since + q) * ld + since + i));
  }
  for (let j = 0; j < l.columns; ++j) memory.fill(atF64(l.fAdded, j * ld + since), 0, <usize>rows << 3); // rows that do not count weigh nothing
}

/** Makes only the first `count` added rows count, for loadKept; returns how many did. The others stay where they are. */
export function countAdded(l: Ledger, count: i32): i32 {
  const before = l.added;
  l.added = count;
  return before;
}

/** x f64[positions] := the estimate, L⁻ᵀ (y + V S⁻¹ g), in column 0 of the worked-on columns. OK or OUT_OF_MEMORY. Clear afterwards. */
export function solveEstimate(l: Ledger): i32 {
  if (beginColumns(l, 1) != OK) return OUT_OF_MEMORY;
  memory.copy(l.x, l.y, <usize>l.positions << 3);
  for (let q = 0; q < l.added; ++q) setF64(l.fAdded, q, -f64At(l.hAdded, q));
  for (let q = 0; q < l.removed; ++q) setF64(l.fRemoved, q, -f64At(l.hRemoved, q));
  carryBack(l);
  return OK;
}

/** X := Σ Aᵀ (times what was done to the columns since carryForward), at all positions. Destroys f. */
export function carryBack(l: Ledger): void {
  weigh(l);
  combine(l, true);
  backwardSolve(l.factor, l.x, l.columns, 0, 0, l.factor.symbolic.supernodes, l.buffer);
  backwardLeaves(l, true);
  l.flops += 2 * <f64>l.columns * (l.factor.symbolic.panelEntries + <f64>l.numberCount);
  l.listFrom = -1; // everything is touched now
}

/** X := Σ Aᵀ at the states in slots i32[count] and what lies above them; elsewhere X is not meaningful. Destroys f. */
export function carryBackTo(l: Ledger, slots: usize, count: i32): void {
  for (let k = 0; k < count; ++k) touch(l, i32At(slots, k));
  for (let leaf = l.lastLeaf; leaf >= 0; --leaf) {
    if (!load<u8>(l.leafMark + leaf)) continue;
    const slot = l.baseSlots + leaf;
    for (let e = i32At(l.parentStart, slot), end = i32At(l.parentStart, slot + 1); e < end; ++e) touch(l, i32At(l.parents, e));
  }
  weigh(l);
  combine(l, false);
  backwardSolve(l.factor, l.x, l.columns, l.list, l.listFrom, l.factor.symbolic.supernodes, l.buffer);
  backwardLeaves(l, false);
}

/** f := K⁻ᵀ J f. */
function weigh(l: Ledger): void { weighSigned(l, l.fAdded, l.fRemoved, l.columns); }

/** Zeroes x wherever it was touched, and the marks. */
export function clearColumns(l: Ledger): void {
  const s = l.factor.symbolic, k = l.side;
  if (l.listFrom < 0) {
    memory.fill(l.x, 0, <usize>k * <usize>l.positions << 3);
    memory.fill(l.mark, 0, <usize>s.supernodes << 2);
    memory.fill(l.leafMark, 0, leaves(l));
  } else {
    for (let e = l.listFrom; e < s.supernodes; ++e) {
      const t = i32At(l.list, e), first = i32At(s.first, t);
      memory.fill(atF64(l.x, first * k), 0, <usize>((i32At(s.first, t + 1) - first) * k) << 3);
      setI32(l.mark, t, 0);
    }
    for (let leaf = 0; leaf <= l.lastLeaf; ++leaf) {
      if (!load<u8>(l.leafMark + leaf)) continue;
      const slot = l.baseSlots + leaf;
      memory.fill(atF64(l.x, i32At(l.slotPosition, slot) * k), 0, <usize>(slotDimension(l, slot) * k) << 3);
      store<u8>(l.leafMark + leaf, 0);
    }
  }
  l.listFrom = s.supernodes;
  l.lastLeaf = -1;
  l.columns = 0;
}
