/** A factor that has moved on: the base (a supernodal factor that never changes), leaves (states that arrived since, each defined by
 *  rotated rows given older states, eliminated before all else, so that nothing upstream changes), and the ledger (rows between
 *  older states, added or taken out, kept as forward-solved columns and the factor of a small dense matrix).
 *
 *  With Λ₀ = L Lᵀ for base and leaves, rows A and signs C = ±1 in the ledger, V = L⁻¹ Aᵀ:
 *      Λ = Λ₀ + Aᵀ C A,   Σ = L⁻ᵀ (I − V S⁻¹ Vᵀ) L⁻¹,   S = C + Vᵀ V.
 *  Everything here stands in *positions*: the base's columns in elimination order, then the leaves' unknowns as they came. A *slot* is
 *  a state, numbered by position; a *node* is a supernode of the base or, after those, a leaf.
 *  Right-hand sides lie side by side for each position, in whole pairs (side × positions, column-major).
 *  Sources: Woodbury (1950); Sherman, Morrison (1950); Golub, Van Loan, "Matrix Computations", section 2.1.4. */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { Factor } from "../factor/cholesky";

@unmanaged
export class Ledger {
  factor: Factor;
  /** Unknowns and states of the base. */
  basePositions: i32;
  baseSlots: i32;
  /** Positions and slots in use, and how many the tables have room for. */
  positions: i32;
  positionRoom: i32;
  slots: i32;
  slotRoom: i32;
  /** i32[slotRoom + 1]: first position of each slot. */
  slotPosition: usize;
  /** i32[slotRoom + 1]: for leaves, where the list of their parents begins (and ends: one more at the end). */
  parentStart: usize;
  /** i32[]: parent slots of all leaves, and how many are in use and have room. */
  parents: usize;
  parentCount: i32;
  parentRoom: i32;
  /** i32[slotRoom]: for leaves, first f64 of their numbers. */
  leafStart: usize;
  /** f64[]: for each leaf L (d × d, lower, column-major), then for each parent G (d × its dimension). */
  numbers: usize;
  numberCount: i32;
  numberRoom: i32;
  /** f64[positionRoom]: y = L⁻¹ η, the right-hand side of base and leaves carried into their coordinates. */
  y: usize;

  /** Right-hand sides being worked on: f64[side × positions], how many f64 there is room for, zero outside the listed nodes and beyond
   *  `columns`; side = stride(columns). */
  x: usize;
  xRoom: f64;
  columns: i32;
  side: i32;
  /** i32[supernodes] and marks: the base's nodes that x touches, list[listFrom …], children first. */
  list: usize;
  listFrom: i32;
  mark: usize;
  /** u8[slotRoom − baseSlots]: leaves that x touches, and the last of them. */
  leafMark: usize;
  lastLeaf: i32;
  /** f64[]: gather buffer of the triangular solves. */
  buffer: usize;
  bufferRoom: f64;

  /** Chunks of V, one a node: addresses u32, rows in use i32, room i32, three numbers a node. A chunk holds i32 ids[room], then
   *  f64[room × width]: the entries of each ledger row at the node's positions, rows along columns. */
  chunks: usize;
  chunkRoom: i32;
  chunkBytes: f64;
  /** Numbers in all chunks, without the room left. */
  chunkEntries: f64;

  /** Rows with sign +1 and −1 in the ledger, and room. */
  added: i32;
  removed: i32;
  addedRoom: i32;
  removedRoom: i32;
  /** Parts of S, lower or full, leading dimension addedRoom (removedRoom for the last): added × added, added × removed, removed². */
  sAdded: usize;
  sCross: usize;
  sRemoved: usize;
  /** Its signed factor K: S = K J Kᵀ, J = (+1 … , −1 …): lower added², then K⁻¹-carried cross part, then lower removed². */
  kAdded: usize;
  kCross: usize;
  kRemoved: usize;
  /** f64: g = e − Vᵀ y, residual of each row before the ledger, and h = K⁻¹ g. */
  gAdded: usize;
  gRemoved: usize;
  hAdded: usize;
  hRemoved: usize;
  /** Of the columns being worked on: c = Vᵀ X and f = K⁻¹ c, f64[addedRoom × fColumns] and f64[removedRoom × fColumns] each, c behind
   *  f in one block. */
  fAdded: usize;
  fRemoved: usize;
  cAdded: usize;
  cRemoved: usize;
  fColumns: i32;
  /** Of the columns being worked on, f64[columns²] each in one block: A Σ Aᵀ, Xᵀ X, and the signed factor of C + A Σ Aᵀ. */
  gram: usize;
  ownGram: usize;
  schur: usize;
  gramRoom: i32;
  /** Multiplications and additions done since the ledger began. */
  flops: f64;
}

/** `room` f64-or-smaller elements of 2^shift bytes at a new address with the first `used` of the old block; releases the old one.
 *  0 when memory runs out; the old block is then kept. */
export function regrow(old: usize, used: f64, room: f64, shift: i32): usize {
  const address = allocateArray(room, shift);
  if (!address) return 0;
  if (old) {
    memory.copy(address, old, <usize>used << shift);
    release(old);
  }
  return address;
}

/** A ledger on a complete base factor, with no leaf and no row. dimensions i32[slots]: unknowns of the base's states in elimination
 *  order. The factor must stay; the ledger takes it over only when the caller says so. Null when memory runs out. */
export function ledgerCreate(factor: Factor, slots: i32, dimensions: usize): Ledger | null {
  const address = allocateArray(1, 9);
  if (!address) return null;
  assert(offsetof<Ledger>() <= 512);
  memory.fill(address, 0, 512);
  const l = changetype<Ledger>(address), s = factor.symbolic;
  l.factor = factor;
  l.basePositions = s.n;
  l.baseSlots = slots;
  l.list = allocateArray(2 * <f64>s.supernodes, 2);
  l.mark = l.list + (<usize>s.supernodes << 2);
  l.listFrom = s.supernodes;
  l.lastLeaf = -1;
  if (!l.list || reserveSlots(l, slots, s.n) != OK || reserveNodes(l, s.supernodes) != OK) { ledgerRelease(l); return null; }
  memory.fill(l.mark, 0, <usize>s.supernodes << 2);
  for (let slot = 0, at = 0; slot < slots; ++slot) { at += i32At(dimensions, slot); setI32(l.slotPosition, slot + 1, at); }
  l.slots = slots;
  l.positions = s.n;
  memory.fill(l.y, 0, <usize>s.n << 3);
  assert(i32At(l.slotPosition, slots) == s.n);
  return l;
}

/** Back to the base alone: no leaf, no row. No worked-on columns may be left. */
export function ledgerRenew(l: Ledger): void {
  releaseChunks(l);
  memory.fill(l.chunks, 0, <usize>(12 * l.chunkRoom));
  l.chunkBytes = l.chunkEntries = 0;
  l.added = l.removed = 0;
  l.parentCount = l.numberCount = 0;
  l.slots = l.baseSlots;
  l.positions = l.basePositions;
  l.flops = 0;
}

function releaseChunks(l: Ledger): void {
  for (let node = 0; node < l.chunkRoom; ++node) release(load<u32>(l.chunks + <usize>(12 * node)));
}

export function ledgerRelease(l: Ledger): void {
  releaseChunks(l);
  release(l.slotPosition);
  release(l.parentStart);
  release(l.parents);
  release(l.leafStart);
  release(l.numbers);
  release(l.y);
  release(l.x);
  release(l.list);
  release(l.leafMark);
  release(l.buffer);
  release(l.chunks);
  release(l.sAdded);
  release(l.sCross);
  release(l.sRemoved);
  release(l.kAdded);
  release(l.kCross);
  release(l.kRemoved);
  release(l.gAdded);
  release(l.gRemoved);
  release(l.fAdded);
  release(l.fRemoved);
  release(l.gram);
  release(changetype<usize>(l));
}

/** Room for so many slots and positions in all. */
export function reserveSlots(l: Ledger, slots: i32, positions: i32): i32 {
  if (slots >= l.slotRoom) {
    const room = slots + (slots >> 1) + 16, used = <f64>l.slots;
    const position = regrow(l.slotPosition, used + 1, <f64>room + 1, 2);
    if (!position) return OUT_OF_MEMORY;
    l.slotPosition = position;
    if (!l.slotRoom) setI32(position, 0, 0);
    const parentStart = regrow(l.parentStart, used + 1, <f64>room + 1, 2);
    if (!parentStart) return OUT_OF_MEMORY;
    l.parentStart = parentStart;
    if (!l.slotRoom) setI32(parentStart, 0, 0);
    const leafStart = regrow(l.leafStart, used, <f64>room, 2);
    if (!leafStart) return OUT_OF_MEMORY;
    l.leafStart = leafStart;
    const leafMark = regrow(l.leafMark, 0, <f64>room, 0);
    if (!leafMark) return OUT_OF_MEMORY;
    memory.fill(leafMark, 0, room);
    l.leafMark = leafMark;
    l.slotRoom = room;
  }
  if (positions >= l.positionRoom) {
    const room = positions + (positions >> 1) + 64;
    const y = regrow(l.y, <f64>l.positions, <f64>room, 3);
    if (!y) return OUT_OF_MEMORY;
    l.y = y;
    l.positionRoom = room;
  }
  return OK;
}

/** Room for the chunks of so many nodes. */
export function reserveNodes(l: Ledger, nodes: i32): i32 {
  if (nodes <= l.chunkRoom) return OK;
  const room = nodes + (nodes >> 1) + 16;
  const chunks = regrow(l.chunks, 3 * <f64>l.chunkRoom, 3 * <f64>room, 2);
  if (!chunks) return OUT_OF_MEMORY;
  memory.fill(chunks + <usize>(12 * l.chunkRoom), 0, <usize>(12 * (room - l.chunkRoom)));
  l.chunks = chunks;
  l.chunkRoom = room;
  return OK;
}

/** Dimension of a slot's state. */
// @ts-ignore: decorator
@inline export function slotDimension(l: Ledger, slot: i32): i32 { return i32At(l.slotPosition, slot + 1) - i32At(l.slotPosition, slot); }

/** Number of leaves. */
// @ts-ignore: decorator
@inline export function leaves(l: Ledger): i32 { return l.slots - l.baseSlots; }
