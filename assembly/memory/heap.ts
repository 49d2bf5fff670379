/** The kernel's allocator: blocks of linear memory, freed again, out of memory as a status (address 0), never a trap.
 *
 *  Free blocks hang in segregated lists: 16 exact sizes of 16 bytes each, then 8 lists an octave. A bitmap finds the first
 *  list whose every block fits, so allocation and release are O(1). Neighbours that are both free are joined at once.
 *  Layout of a block: u32 size (of the whole block, multiple of 16; bit 0: in use), u32 size of the block before it, then
 *  8 unused bytes, so that payloads lie on multiples of 16. Free blocks keep two links in their payload.
 *  Source: Knuth, The Art of Computer Programming 1, section 2.5 (boundary tags); Masmano, Ripoll, Crespo, Real (2004), "TLSF". */

const HEADER: usize = 16;
const SMALLEST: usize = 48; // header and two links, rounded up
const EXACT = 16; // lists of one size each
const BINS = EXACT + 24 * 8;
const WORDS = (BINS + 31) >> 5;
/** Bytes memory grows by at least, so that many small requests do not each pay a call to the host. */
const GROWTH: usize = 1 << 18;
/** Bytes kept below the heap for the buffers of the dense kernels: in the data section their zeros would swell the file. */
const RESERVED: usize = 160 << 10;
const LAST_PAGE = 65535; // one page below 4 GiB, so that an end address fits 32 bits

const binHeads = memory.data(BINS * 4, 16);
const binMap = memory.data(WORDS * 4, 16);

let bottom: usize = 0; // first block; 0 until the first request
let top: usize = 0; // the sentinel: a header in use, at the end of memory
let used: usize = 0;
let peak: usize = 0;
let limit: usize = <usize>LAST_PAGE << 16;

// @ts-ignore: decorator
@inline function sizeOf(block: usize): usize { return load<u32>(block) & ~1; }
// @ts-ignore: decorator
@inline function isFree(block: usize): bool { return (load<u32>(block) & 1) == 0; }
// @ts-ignore: decorator
@inline function setHeader(block: usize, size: usize, inUse: u32): void { store<u32>(block, <u32>size | inUse); }
// @ts-ignore: decorator
@inline function before(block: usize): usize { return block - load<u32>(block, 4); }

/** The list that a block of this size hangs in: the last one all of whose blocks are no larger than the next list's. */
function binOf(size: usize): i32 {
  const units = <u32>(size >> 4);
  if (units < <u32>EXACT) return <i32>units;
  const octave = 31 - <i32>clz(units);
  return EXACT + (octave - 4) * 8 + <i32>((units >> (octave - 3)) & 7);
}

function insert(block: usize): void {
  const bin = binOf(sizeOf(block));
  const head = load<u32>(binHeads + (<usize>bin << 2));
  store<u32>(block, 0, 16);
  store<u32>(block, head, 20);
  if (head) store<u32>(head, <u32>block, 16);
  store<u32>(binHeads + (<usize>bin << 2), <u32>block);
  const word = binMap + ((<usize>bin >> 5) << 2);
  store<u32>(word, load<u32>(word) | (1 << (bin & 31)));
}

function remove(block: usize): void {
  const bin = binOf(sizeOf(block));
  const previous = load<u32>(block, 16), next = load<u32>(block, 20);
  if (next) store<u32>(next, previous, 16);
  if (previous) { store<u32>(previous, next, 20); return; }
  store<u32>(binHeads + (<usize>bin << 2), next);
  if (!next) {
    const word = binMap + ((<usize>bin >> 5) << 2);
    store<u32>(word, load<u32>(word) & ~(1 << (bin & 31)));
  }
}

/** A free block of at least `size` bytes, still in its list, or 0. */
function find(size: usize): usize {
  let bin = binOf(size);
  let block: usize = load<u32>(binHeads + (<usize>bin << 2));
  for (let tries = 0; block && tries < 8; ++tries) { // its own list may hold smaller ones
    if (sizeOf(block) >= size) return block;
    block = load<u32>(block, 20);
  }
  bin += 1;
  for (let word = bin >> 5; word < WORDS; ++word) {
    let bits = load<u32>(binMap + (<usize>word << 2));
    if (word == bin >> 5) bits &= 0xffffffff << (bin & 31);
    if (bits) return load<u32>(binHeads + (<usize>((word << 5) + <i32>ctz(bits)) << 2));
  }
  return 0;
}

/** Address of the RESERVED bytes, a multiple of 16. */
// @ts-ignore: decorator
@inline export function reserved(): usize { return (__heap_base + 15) & ~(15 as usize); }

/** Makes memory end at least `size` bytes of free block beyond what is free at its end; false when that cannot be. */
function grow(size: usize): bool {
  if (!bottom) {
    bottom = reserved() + RESERVED;
    top = bottom;
    store<u32>(top, 0, 4);
    const end = <usize>memory.size() << 16; // the module's initial memory is far below 4 GiB
    if (end >= bottom + SMALLEST + HEADER) {
      top = end - HEADER;
      setHeader(bottom, top - bottom, 0);
      store<u32>(bottom, 0, 4);
      store<u32>(top, <u32>(top - bottom), 4);
      setHeader(top, 0, 1);
      insert(bottom);
      if (find(size)) return true;
    } else return false;
  }
  const last = before(top);
  const have = last != top && isFree(last) ? sizeOf(last) : 0;
  const missing = size - have;
  const wanted = missing > GROWTH ? missing : GROWTH;
  const pagesNow = memory.size();
  let pages = <i32>((<u64>wanted + 0xffff) >> 16);
  if (pagesNow + pages > LAST_PAGE) pages = LAST_PAGE - pagesNow;
  if ((<u64>pages << 16) < <u64>missing || memory.grow(pages) < 0) return false;
  const block = top, bytes = <usize>pages << 16;
  setHeader(block, bytes, 0);
  top = block + bytes;
  store<u32>(top, <u32>bytes, 4);
  setHeader(top, 0, 1);
  join(block);
  return true;
}

/** Hangs a free block into its list after joining it with free neighbours. */
function join(block: usize): void {
  let size = sizeOf(block);
  const next = block + size;
  if (isFree(next)) { remove(next); size += sizeOf(next); }
  if (block != bottom) {
    const previous = before(block);
    if (isFree(previous)) { remove(previous); size += sizeOf(previous); block = previous; }
  }
  setHeader(block, size, 0);
  store<u32>(block + size, <u32>size, 4);
  insert(block);
}

/** `bytes` of memory at an address that is a multiple of 16, contents undefined; 0 when the limit or WebAssembly's end is hit.
 *  Release it with `release`. O(1). */
export function allocate(bytes: usize): usize {
  if (bytes > limit) return 0;
  let size = (bytes + HEADER + 15) & ~(15 as usize);
  if (size < SMALLEST) size = SMALLEST;
  if (used + size > limit || used + size < used) return 0;
  let block = find(size);
  if (!block) {
    if (!grow(size)) return 0;
    block = find(size);
    if (!block) block = before(top); // just grown, larger than any list's bound
  }
  remove(block);
  const rest = sizeOf(block) - size;
  if (rest >= SMALLEST) {
    setHeader(block, size, 1);
    const tail = block + size;
    store<u32>(tail, <u32>size, 4);
    setHeader(tail, rest, 0);
    store<u32>(tail + rest, <u32>rest, 4);
    insert(tail);
  } else setHeader(block, sizeOf(block), 1);
  used += sizeOf(block);
  if (used > peak) peak = used;
  return block + HEADER;
}

/** Gives a block back. Address 0 is allowed and does nothing. O(1). */
export function release(address: usize): void {
  if (!address) return;
  const block = address - HEADER;
  assert(!isFree(block), "released twice");
  used -= sizeOf(block);
  join(block);
}

/** Memory for `count` elements of 2^shift bytes, or 0 when the product passes 32 bits or the allocator refuses. */
export function allocateArray(count: f64, shift: i32): usize {
  const bytes = count * <f64>(1 << shift);
  return bytes < 4294901760 ? allocate(<usize>bytes) : 0;
}

/** The most bytes that may be in use at once. A number below what is in use refuses every further request. */
export function setMemoryLimit(bytes: f64): void {
  const most = <f64>LAST_PAGE * 65536;
  limit = <usize>(bytes < most ? bytes : most);
}
export function memoryLimit(): f64 { return <f64>limit; }
/** Bytes in use, headers included. */
export function memoryUsed(): f64 { return <f64>used; }
/** The largest `memoryUsed` so far. */
export function memoryPeak(): f64 { return <f64>peak; }
/** Bytes that WebAssembly holds; it never shrinks. */
export function memoryCapacity(): f64 { return <f64>memory.size() * 65536; }
