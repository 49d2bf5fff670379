/** Blocks of unknowns that share one sparsity pattern, and the graph of blocks.
 *  Columns i and j are indistinguishable when their full patterns, each with its own diagonal, are equal; then they are adjacent,
 *  so column j's mates after it stand in its own lower pattern. They are told by a 64-bit hash of the pattern. The graph of
 *  blocks is the union pattern of whatever blocks come out, so a collision of hashes could only add explicit zeros.
 *  Source: Ashcraft, "Compressed graphs and the minimum degree algorithm", SIAM J. Sci. Comput. 16 (1995). */
import { allocateArray, release } from "../memory/heap";
import { addI32, atI32, i32At, setI32 } from "../memory/access";
import { Graph } from "./graph";

/** Blocks given by the caller are kept while at most this share of the entries they store are explicit zeros. Fill multiplies
 *  such zeros, and compression finds what is left of the blocks; common practice, no source. */
const MOST_PADDING = 0.05;

@unmanaged
export class Blocks {
  /** The graph of blocks; `graph.n` is their number, `graph.weight` their sizes. Shares memory with this object. */
  graph: Graph;
  /** Unknowns. */
  n: i32;
  /** i32[n]: the block of each unknown. Blocks are numbered by their first unknown. */
  blockOf: usize;
  /** i32[graph.n + 1] and i32[n]: unknowns of block b, ascending: members[blockStart[b]] … members[blockStart[b + 1] − 1]. */
  blockStart: usize;
  members: usize;
  /** Entries below the diagonal, within and between blocks, that the matrix does not hold: explicit zeros. */
  padding: f64;
}

/** Blocks of the symmetric matrix whose lower triangle has the pattern columnStart i32[n + 1], rowIndex i32[columnStart[n]],
 *  rows ascending in each column, diagonal entries there or not. `blockSizes` i32[blockCount], adding up to n, cuts the
 *  unknowns into contiguous blocks; address 0, or too many zeros inside those blocks, asks for compression instead.
 *  Null when memory runs out.  Cost: two reads of the pattern (about 4 ns an entry) and two of the blocks' graph. */
export function blocksOf(n: i32, columnStart: usize, rowIndex: usize, blockSizes: usize, blockCount: i32): Blocks | null {
  const nested = allocateArray(<f64>n + 1, 0);
  if (!nested) return null;
  store<u8>(nested, 0);
  for (let j = 1; j < n; ++j) store<u8>(nested + j, u8(nestsInPrevious(columnStart, rowIndex, j)));
  let blocks = blockSizes ? givenBlocks(n, columnStart, rowIndex, blockSizes, blockCount, nested) : null;
  const held = <f64>i32At(columnStart, n);
  if (blocks && blocks.padding > MOST_PADDING * (blocks.padding + held)) { releaseBlocks(blocks); blocks = null; }
  if (!blocks) blocks = compressedBlocks(n, columnStart, rowIndex, nested);
  release(nested);
  return blocks;
}

function givenBlocks(n: i32, columnStart: usize, rowIndex: usize, blockSizes: usize, blockCount: i32, nested: usize): Blocks | null {
  const blocks = allocateBlocks(n);
  if (!blocks) return null;
  for (let b = 0, j = 0; b < blockCount; ++b) {
    for (const end = j + i32At(blockSizes, b); j < end; ++j) setI32(blocks.blockOf, j, b);
  }
  return connect(blocks, blockCount, columnStart, rowIndex, nested) ? blocks : null;
}

function compressedBlocks(n: i32, columnStart: usize, rowIndex: usize, nested: usize): Blocks | null {
  const blocks = allocateBlocks(n);
  if (!blocks) return null;
  const count = findIndistinguishable(n, columnStart, rowIndex, blocks.blockOf, nested);
  if (count < 0) { releaseBlocks(blocks); return null; }
  return connect(blocks, count, columnStart, rowIndex, nested) ? blocks : null;
}

export function releaseBlocks(blocks: Blocks): void {
  release(blocks.graph.start);
  release(blocks.graph.adjacent);
  release(blocks.graph.weight);
  release(changetype<usize>(blocks.graph));
  release(blocks.blockOf);
  release(blocks.blockStart);
  release(blocks.members);
  release(changetype<usize>(blocks));
}

function allocateBlocks(n: i32): Blocks | null {
  const blocks = changetype<Blocks>(allocateArray(<f64>offsetof<Blocks>(), 0));
  if (!changetype<usize>(blocks)) return null;
  memory.fill(changetype<usize>(blocks), 0, offsetof<Blocks>());
  blocks.n = n;
  const graph = allocateArray(<f64>offsetof<Graph>(), 0);
  if (!graph) { release(changetype<usize>(blocks)); return null; }
  memory.fill(graph, 0, offsetof<Graph>());
  blocks.graph = changetype<Graph>(graph);
  blocks.blockOf = allocateArray(<f64>n + 1, 2);
  if (!blocks.blockOf) { releaseBlocks(blocks); return null; }
  return blocks;
}

// @ts-ignore: decorator
@inline function addU64(p: usize, k: i32, v: u64): void { const at = p + (<usize>k << 3); store<u64>(at, load<u64>(at) + v); }

/** A 64-bit number that looks random, different for every i. Source: Steele, Lea, Flood, "Fast splittable pseudorandom number
 *  generators" (2014), first half of the finalizer: sums of these are compared, never their single bits. */
// @ts-ignore: decorator
@inline function scatter(i: i32): u64 {
  const z = <u64>(i + 1) * 0x9e3779b97f4a7c15;
  return (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9;
}

/** True when column j has the rows of column j − 1 but j itself. Columns of a block mostly come one after another, so one of a
 *  run of nested columns tells the rest: the passes below read the pattern of blocks, not of unknowns. */
function nestsInPrevious(columnStart: usize, rowIndex: usize, j: i32): bool {
  let previous = i32At(columnStart, j - 1), p = i32At(columnStart, j);
  const previousEnd = p, end = i32At(columnStart, j + 1);
  if (previous < previousEnd && i32At(rowIndex, previous) == j - 1) ++previous;
  if (previous == previousEnd || i32At(rowIndex, previous) != j) return false;
  ++previous;
  if (p < end && i32At(rowIndex, p) == j) ++p;
  if (previousEnd - previous != end - p) return false;
  for (; p < end; ++p, ++previous) if (i32At(rowIndex, p) != i32At(rowIndex, previous)) return false;
  return true;
}

/** Fills blockOf i32[n] and nested u8[n] (see `nestsInPrevious`), and gives the number of blocks; −1 when memory runs out. */
function findIndistinguishable(n: i32, columnStart: usize, rowIndex: usize, blockOf: usize, nested: usize): i32 {
  const hash = allocateArray(<f64>n + 1, 3);
  if (!hash) return -1;
  // The hash of a column is the sum over its pattern: independent of order, so that one read of the lower half gives both halves.
  for (let j = 0; j < n; ++j) store<u64>(hash + (<usize>j << 3), scatter(j));
  for (let first = 0; first < n;) {
    let last = first, own = scatter(first); // columns first … last are nested; `own` sums their scattered numbers
    while (last + 1 < n && load<u8>(nested + last + 1)) own += scatter(++last);
    let below: u64 = 0;
    for (let p = i32At(columnStart, last), end = i32At(columnStart, last + 1); p < end; ++p) {
      const i = i32At(rowIndex, p);
      if (i == last) continue;
      below += scatter(i);
      addU64(hash, i, own);
    }
    for (let j = first; j <= last; ++j) addU64(hash, j, own - scatter(j) + below);
    first = last + 1;
  }
  let count = 0;
  memory.fill(blockOf, 0xff, <usize>n << 2);
  for (let j = 0; j < n; ++j) {
    if (i32At(blockOf, j) >= 0) continue;
    setI32(blockOf, j, count);
    const own = load<u64>(hash + (<usize>j << 3));
    for (let p = i32At(columnStart, j), end = i32At(columnStart, j + 1); p < end; ++p) {
      const i = i32At(rowIndex, p);
      if (load<u64>(hash + (<usize>i << 3)) == own) setI32(blockOf, i, count);
    }
    ++count;
  }
  release(hash);
  return count;
}

/** Builds everything that follows from `blockOf`: members, sizes, the union graph, the padding. False, with `blocks` released,
 *  when memory runs out. */
function connect(blocks: Blocks, count: i32, columnStart: usize, rowIndex: usize, nested: usize): bool {
  const n = blocks.n, graph = blocks.graph;
  graph.n = count;
  blocks.blockStart = allocateArray(<f64>count + 1, 2);
  blocks.members = allocateArray(<f64>n + 1, 2);
  graph.weight = allocateArray(<f64>count + 1, 2);
  graph.start = allocateArray(<f64>count + 1, 2);
  const found = allocateArray(<f64>i32At(columnStart, n) + 1, 2); // neighbours of each block as the columns tell them
  const foundStart = allocateArray(<f64>count + 1, 2);
  const mark = allocateArray(<f64>count + 1, 2);
  const inner = allocateArray(<f64>count + 1, 2);
  if (blocks.blockStart && blocks.members && graph.weight && graph.start && found && foundStart && mark && inner) {
    listMembers(blocks, mark);
    const ascending = listNeighbours(blocks, columnStart, rowIndex, nested, found, foundStart, mark);
    if (ascending || sortUpper(count, found, foundStart, graph.start, mark, inner)) symmetrize(graph, found, foundStart, mark);
  }
  release(found);
  release(foundStart);
  release(mark);
  release(inner);
  if (!graph.adjacent) { releaseBlocks(blocks); return false; }
  let stored: f64 = 0; // entries off the diagonal that the blocks hold, twice
  for (let b = 0; b < count; ++b) {
    const size = i32At(graph.weight, b);
    let others: f64 = <f64>size - 1;
    for (let p = i32At(graph.start, b), end = i32At(graph.start, b + 1); p < end; ++p) others += <f64>i32At(graph.weight, i32At(graph.adjacent, p));
    stored += <f64>size * others;
  }
  let diagonals = 0;
  for (let j = 0; j < n; ++j) {
    const p = i32At(columnStart, j);
    diagonals += i32(p < i32At(columnStart, j + 1) && i32At(rowIndex, p) == j);
  }
  blocks.padding = stored * 0.5 - <f64>(i32At(columnStart, n) - diagonals);
  return true;
}

function listMembers(blocks: Blocks, next: usize): void {
  const n = blocks.n, graph = blocks.graph, count = graph.n, blockOf = blocks.blockOf;
  memory.fill(graph.weight, 0, <usize>count << 2);
  for (let j = 0; j < n; ++j) addI32(graph.weight, i32At(blockOf, j), 1);
  let sum = 0;
  for (let b = 0; b < count; ++b) {
    setI32(blocks.blockStart, b, sum);
    setI32(next, b, sum);
    sum += i32At(graph.weight, b);
  }
  setI32(blocks.blockStart, count, sum);
  for (let j = 0; j < n; ++j) {
    const b = i32At(blockOf, j), at = i32At(next, b);
    setI32(blocks.members, at, j);
    setI32(next, b, at + 1);
  }
}

/** found[foundStart[a]] … = the blocks that columns of block a touch below the diagonal, each once. True when every list holds
 *  later blocks only, ascending: always so when the columns of a block are contiguous and share their pattern. Otherwise an edge
 *  can be told from both of its ends. */
function listNeighbours(blocks: Blocks, columnStart: usize, rowIndex: usize, nested: usize, found: usize, foundStart: usize, mark: usize): bool {
  const count = blocks.graph.n, blockOf = blocks.blockOf, blockStart = blocks.blockStart, members = blocks.members;
  memory.fill(mark, 0xff, <usize>count << 2);
  let m = 0, ascending = true;
  for (let a = 0; a < count; ++a) {
    setI32(foundStart, a, m);
    setI32(mark, a, a);
    let previous = -2, latest = a;
    for (let q = i32At(blockStart, a), last = i32At(blockStart, a + 1); q < last; ++q) {
      const j = i32At(members, q);
      const known = previous == j - 1 && load<u8>(nested + j) != 0;
      previous = j;
      if (known) continue;
      for (let p = i32At(columnStart, j), end = i32At(columnStart, j + 1); p < end; ++p) {
        const b = i32At(blockOf, i32At(rowIndex, p));
        if (i32At(mark, b) == a) continue;
        setI32(mark, b, a);
        setI32(found, m++, b);
        ascending = ascending && b > latest;
        latest = b;
      }
    }
  }
  setI32(foundStart, count, m);
  return ascending;
}

/** Turns edges told from either end, some from both, into ascending lists of the later neighbours of each vertex, every edge
 *  once: two sorts by counting. `start` i32[n + 1], `next`, `end` i32[n] are workspaces. False when memory runs out. */
function sortUpper(n: i32, found: usize, foundStart: usize, start: usize, next: usize, end: usize): bool {
  const m = i32At(foundStart, n);
  const lower = allocateArray(<f64>m + 1, 2);
  if (!lower) return false;
  // By the larger end first,
  memory.fill(start, 0, (<usize>n + 1) << 2);
  for (let a = 0; a < n; ++a) {
    for (let p = i32At(foundStart, a), stop = i32At(foundStart, a + 1); p < stop; ++p) addI32(start, max(a, i32At(found, p)), 1);
  }
  exclusiveSums(n, start, next);
  setI32(start, n, m);
  for (let a = 0; a < n; ++a) {
    for (let p = i32At(foundStart, a), stop = i32At(foundStart, a + 1); p < stop; ++p) {
      const b = i32At(found, p), high = max(a, b), at = i32At(next, high);
      setI32(lower, at, min(a, b));
      setI32(next, high, at + 1);
    }
  }
  // then by the smaller one: larger ends arrive ascending, and an edge told twice arrives twice in a row.
  memory.fill(next, 0, <usize>n << 2);
  for (let p = 0; p < m; ++p) addI32(next, i32At(lower, p), 1);
  exclusiveSums(n, next, end);
  for (let high = 0; high < n; ++high) {
    for (let p = i32At(start, high), stop = i32At(start, high + 1); p < stop; ++p) {
      const a = i32At(lower, p), at = i32At(end, a);
      if (at > i32At(next, a) && i32At(found, at - 1) == high) continue;
      setI32(found, at, high);
      setI32(end, a, at + 1);
    }
  }
  let kept = 0; // close the gaps that twice-told edges left
  for (let a = 0; a < n; ++a) {
    const from = i32At(next, a), size = i32At(end, a) - from;
    memory.copy(atI32(found, kept), atI32(found, from), <usize>size << 2);
    setI32(foundStart, a, kept);
    kept += size;
  }
  setI32(foundStart, n, kept);
  release(lower);
  return true;
}

/** The symmetric graph from the later neighbours of each vertex, ascending. `adjacent` stays 0 when memory runs out. */
function symmetrize(graph: Graph, upper: usize, upperStart: usize, next: usize): void {
  const n = graph.n, start = graph.start;
  memory.fill(start, 0, (<usize>n + 1) << 2);
  for (let a = 0; a < n; ++a) {
    const from = i32At(upperStart, a), end = i32At(upperStart, a + 1);
    addI32(start, a, end - from);
    for (let p = from; p < end; ++p) addI32(start, i32At(upper, p), 1);
  }
  exclusiveSums(n, start, next);
  setI32(start, n, 2 * i32At(upperStart, n));
  const adjacent = allocateArray(<f64>i32At(start, n) + 1, 2);
  graph.adjacent = adjacent;
  if (!adjacent) return;
  // Vertex a's earlier neighbours have all been here when its turn comes; its later ones follow.
  for (let a = 0; a < n; ++a) {
    let own = i32At(next, a);
    for (let p = i32At(upperStart, a), end = i32At(upperStart, a + 1); p < end; ++p) {
      const b = i32At(upper, p), at = i32At(next, b);
      setI32(adjacent, own++, b);
      setI32(adjacent, at, a);
      setI32(next, b, at + 1);
    }
  }
}

/** Turns counts start[0 … n − 1] into first positions, and copies them to `next`. */
function exclusiveSums(n: i32, start: usize, next: usize): void {
  let sum = 0;
  for (let a = 0; a < n; ++a) {
    const size = i32At(start, a);
    setI32(start, a, sum);
    setI32(next, a, sum);
    sum += size;
  }
}
