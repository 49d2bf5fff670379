/** From a pattern to a Symbolic, as a long call in slices: blocks, order, tree, supernodes, rows, runs, records.
 *  Each slice does about `budget` units of work, so a page can paint in between; nothing of it is visible before the end, and a
 *  job that is dropped halfway gives all its memory back. */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING, TOO_LARGE } from "../memory/status";
import { Blocks, blocksOf, releaseBlocks } from "../ordering/compress";
import {
  GIVEN, Ordering, orderingAdvance, orderingBegin, orderingChosen, orderingFinish, orderingProgress, orderingRelease,
} from "../ordering/ordering";
import { columnCounts } from "./counts";
import { Halves, permuteGraph, releaseHalves } from "./halves";
import { countRecords, makeRecordRoom, resolveRecords, writeRecords } from "./positions";
import { appendRows, childRuns, layPanels, planStacks } from "./structure";
import { findSupernodes, releasePartition } from "./supernodes";
import { allocateSymbolic, releaseSymbolic, Symbolic } from "./symbolic";
import { eliminationTree, postorder } from "./tree";

// What a job does next.
const COMPRESS = 0, ORDER = 1, TREE = 2, ROWS = 3, RUNS = 4, COUNT = 5, WRITE = 6, RESOLVE = 7, FINISHED = 8;
/** Budget units (about 1 ns each) of the phases after the order, for one entry of what they go through.
 *  Rough: they set where slices end, never a result. */
const UNITS_TREE = 60.0, UNITS_ROWS = 12.0, UNITS_RUNS = 3.0, UNITS_RECORDS = 8.0;
/** Share of progress that the order takes; the rest goes to what follows. */
const ORDER_SHARE = 0.6;

@unmanaged
export class Analysis {
  phase: i32;
  /** Where the present phase stands. */
  at: i32;
  n: i32;
  columnStart: usize;
  rowIndex: usize;
  blockCount: i32;
  blockSizes: usize;
  kind: i32;
  given: usize;
  queries: f64;
  blocks: Blocks | null;
  ordering: usize;
  halves: Halves | null;
  symbolic: Symbolic | null;
  /** i32[4 blocks + 1]: step of each block column, its inverse (label), supernode and first unknown of each block column. */
  step: usize;
  label: usize;
  blockSupernode: usize;
  firstUnknown: usize;
  /** i32[supernodes], i32[supernodes], i32[n]: workspaces of the phases. */
  fill: usize;
  mark: usize;
  local: usize;
  /** Pairs found so far (RUNS), or columns of the records (WRITE, RESOLVE). */
  temporary: usize;
  found: i32;
}

/** Starts the analysis of a lower triangle by columns (rows ascending): columnStart i32[n + 1], rowIndex i32[nnz]; both must stay
 *  until the job is finished or released. blockSizes i32[blockCount] (0: find the blocks). kind: see ordering.ts; given i32[n] (the
 *  caller's order, for kind GIVEN). queries: marginals asked of one factor, for the choice of the order. 0 when memory runs out. */
export function analysisBegin(
  n: i32, columnStart: usize, rowIndex: usize, blockCount: i32, blockSizes: usize, kind: i32, given: usize, queries: f64,
): Analysis | null {
  const address = allocateArray(1, 8);
  if (!address) return null;
  assert(offsetof<Analysis>() <= 256);
  memory.fill(address, 0, 256);
  const job = changetype<Analysis>(address);
  job.n = n;
  job.columnStart = columnStart;
  job.rowIndex = rowIndex;
  job.blockCount = blockCount;
  job.blockSizes = blockSizes;
  job.kind = kind;
  job.given = given;
  job.queries = queries;
  return job;
}

/** Does about `budget` units of work. OK when the analysis is complete, RUNNING, OUT_OF_MEMORY or TOO_LARGE (factor beyond 4 GiB). */
export function analysisAdvance(job: Analysis, budget: f64): i32 {
  let spent: f64 = 0;
  while (spent < budget && job.phase != FINISHED) {
    if (job.phase == COMPRESS) {
      job.blocks = blocksOf(job.n, job.columnStart, job.rowIndex, job.blockSizes, job.blockCount);
      if (!job.blocks) return OUT_OF_MEMORY;
      spent += <f64>i32At(job.columnStart, job.n) * UNITS_RECORDS;
      job.phase = ORDER;
    } else if (job.phase == ORDER) {
      const status = advanceOrder(job, budget - spent);
      if (status != OK) return status;
      spent = budget; // the order has used what there was
    } else if (job.phase == TREE) {
      const status = buildTree(job);
      if (status != OK) return status;
      spent += <f64>(<Blocks>job.blocks).graph.n * UNITS_TREE;
    } else if (job.phase == ROWS) spent += advanceRows(job, budget - spent);
    else if (job.phase == RUNS) {
      const units = advanceRuns(job, budget - spent);
      if (units < 0) return OUT_OF_MEMORY;
      spent += units;
    } else {
      const units = advanceRecords(job, budget - spent);
      if (units < 0) return OUT_OF_MEMORY;
      spent += units;
    }
  }
  return job.phase == FINISHED ? OK : RUNNING;
}

/** Work done ÷ work predicted, 0 to 1. */
export function analysisProgress(job: Analysis): f64 {
  if (job.phase == COMPRESS) return 0;
  if (job.phase == ORDER) return job.ordering ? ORDER_SHARE * orderingProgress(changetype<Ordering>(job.ordering)) : 0;
  if (job.phase == FINISHED) return 1;
  let within: f64 = 0;
  if (job.phase == ROWS) within = <f64>job.at / <f64>((<Blocks>job.blocks).graph.n + 1);
  else if (job.phase == RUNS || job.phase == RESOLVE) within = <f64>job.at / <f64>((<Symbolic>job.symbolic).supernodes + 1);
  else if (job.phase == COUNT || job.phase == WRITE) within = <f64>job.at / <f64>(job.n + 1);
  return ORDER_SHARE + (1 - ORDER_SHARE) * (<f64>(job.phase - TREE) + within) / <f64>(FINISHED - TREE);
}

/** Takes the result out of a finished job; the job is still to be released. */
export function analysisFinish(job: Analysis): Symbolic | null {
  assert(job.phase == FINISHED);
  const symbolic = job.symbolic;
  job.symbolic = null;
  return symbolic;
}

/** For a job that ended TOO_LARGE: the bytes that the entries of L alone would take. */
export function analysisFactorBytes(job: Analysis): f64 { return 8 * (<Symbolic>job.symbolic).nonzeros; }

/** Drops the job and all it still holds, at any time. */
export function analysisRelease(job: Analysis): void {
  if (job.ordering) orderingRelease(changetype<Ordering>(job.ordering));
  if (job.halves) releaseHalves(<Halves>job.halves);
  if (job.blocks) releaseBlocks(<Blocks>job.blocks);
  if (job.symbolic) releaseSymbolic(<Symbolic>job.symbolic);
  release(job.step);
  release(job.fill);
  release(job.local);
  release(job.temporary);
  release(changetype<usize>(job));
}

function advanceOrder(job: Analysis, budget: f64): i32 {
  const blocks = <Blocks>job.blocks;
  if (!job.ordering) {
    if (job.kind == GIVEN && !job.local) { // the caller orders unknowns: a state goes where its first one does
      const order = allocateArray(2 * <f64>blocks.graph.n, 2);
      if (!order) return OUT_OF_MEMORY;
      job.local = order;
      const seen = order + (<usize>blocks.graph.n << 2);
      memory.fill(seen, 0, <usize>blocks.graph.n << 2);
      for (let k = 0, b = 0; k < job.n; ++k) {
        const v = i32At(blocks.blockOf, i32At(job.given, k));
        if (!i32At(seen, v)) { setI32(seen, v, 1); setI32(order, b++, v); }
      }
    }
    job.ordering = orderingBegin(blocks.graph, job.kind, job.local, 1, 1, job.queries);
    if (!job.ordering) return OUT_OF_MEMORY;
  }
  const status = orderingAdvance(changetype<Ordering>(job.ordering), budget);
  if (status == OK) { release(job.local); job.local = 0; job.phase = TREE; }
  return status;
}

/** Tree, counts, supernodes, and all tables whose size follows from them. */
function buildTree(job: Analysis): i32 {
  const blocks = <Blocks>job.blocks, graph = blocks.graph, b = graph.n, n = job.n;
  const kind = orderingChosen(changetype<Ordering>(job.ordering)), order = orderingFinish(changetype<Ordering>(job.ordering));
  job.ordering = 0;
  const scratch = allocateArray(9 * <f64>b + 1, 2);
  job.step = allocateArray(4 * <f64>b + 1, 2);
  const s = allocateSymbolic();
  job.symbolic = s;
  if (!scratch || !job.step || !s) { release(scratch); release(order); return OUT_OF_MEMORY; }
  const size = <usize>b << 2;
  job.label = job.step + size;
  job.blockSupernode = job.label + size;
  job.firstUnknown = job.blockSupernode + size;
  const place = scratch, parent = place + size, post = parent + size, count = post + size, weight = count + size, work = weight + size;
  for (let k = 0; k < b; ++k) { setI32(place, i32At(order, k), k); setI32(weight, k, i32At(graph.weight, i32At(order, k))); }
  const halves = permuteGraph(graph, order, place);
  job.halves = halves;
  if (!halves) { release(scratch); release(order); return OUT_OF_MEMORY; }
  eliminationTree(b, halves.earlierStart, halves.earlier, parent, work);
  postorder(b, parent, post, work, work + size);
  columnCounts(b, parent, post, halves.laterStart, halves.later, weight, count, work);
  for (let k = 0; k < b; ++k) {
    let c = <f64>i32At(count, k);
    for (let d = i32At(weight, k); d > 0; --d, c -= 1) { s.nonzeros += c; s.flops += c * c; }
  }
  const partition = findSupernodes(b, parent, post, count, weight);
  if (!partition) { release(scratch); release(order); return OUT_OF_MEMORY; }

  const supernodes = partition.count;
  s.n = n;
  s.nnzA = i32At(job.columnStart, n);
  s.blocks = b;
  s.supernodes = supernodes;
  s.ordering = kind;
  let rows: f64 = 0;
  for (let t = 0; t < supernodes; ++t) rows += <f64>i32At(partition.below, t);
  s.order = allocateArray(<f64>n, 2);
  s.place = allocateArray(<f64>n, 2);
  s.supernodeOf = allocateArray(<f64>n, 2);
  s.first = allocateArray(<f64>supernodes + 1, 2);
  s.parent = allocateArray(<f64>supernodes, 2);
  s.rowStart = allocateArray(<f64>supernodes + 1, 2);
  s.rows = allocateArray(rows, 2);
  s.panel = allocateArray(<f64>supernodes + 1, 2);
  s.lead = allocateArray(<f64>supernodes, 2);
  s.runStart = allocateArray(<f64>supernodes, 2);
  s.runEnd = allocateArray(<f64>supernodes, 2);
  s.childStart = allocateArray(<f64>supernodes + 1, 2);
  s.children = allocateArray(<f64>supernodes, 2);
  s.update = allocateArray(<f64>supernodes, 2);
  s.front = allocateArray(<f64>supernodes, 2);
  s.recordStart = allocateArray(<f64>supernodes + 1, 2);
  job.fill = allocateArray(2 * <f64>supernodes, 2);
  job.mark = job.fill + (<usize>supernodes << 2);
  job.local = allocateArray(<f64>n, 2);
  const complete = s.order && s.place && s.supernodeOf && s.first && s.parent && s.rowStart && s.rows && s.panel && s.lead && s.runStart
    && s.runEnd && s.childStart && s.children && s.update && s.front && s.recordStart && job.fill && job.local;
  if (!complete) { release(scratch); release(order); releasePartition(partition); return OUT_OF_MEMORY; }

  for (let k = 0; k < b; ++k) { setI32(job.label, k, i32At(partition.label, k)); setI32(job.step, i32At(partition.label, k), k); }
  let unknown = 0, row = 0;
  for (let t = 0; t < supernodes; ++t) {
    setI32(s.first, t, unknown);
    setI32(s.rowStart, t, row);
    setI32(s.parent, t, i32At(partition.parent, t));
    setI32(job.fill, t, row);
    setI32(job.mark, t, -1);
    setI32(s.recordStart, t, 0);
    setI32(s.runStart, t, 0); // roots have none
    setI32(s.runEnd, t, 0);
    row += i32At(partition.below, t);
    for (let block = i32At(partition.firstBlock, t), end = i32At(partition.firstBlock, t + 1); block < end; ++block) {
      setI32(job.blockSupernode, block, t);
      setI32(job.firstUnknown, block, unknown);
      const v = i32At(order, i32At(job.step, block));
      for (let q = i32At(blocks.blockStart, v), last = i32At(blocks.blockStart, v + 1); q < last; ++q) {
        const i = i32At(blocks.members, q);
        setI32(s.order, unknown, i);
        setI32(s.place, i, unknown);
        setI32(s.supernodeOf, unknown, t);
        ++unknown;
      }
    }
  }
  setI32(s.first, supernodes, unknown);
  setI32(s.rowStart, supernodes, row);
  setI32(s.recordStart, supernodes, 0);
  setI32(job.firstUnknown, b, unknown);
  assert(unknown == n);
  listChildren(s);
  const fits = layPanels(s);
  planStacks(s, job.local); // at most n supernodes
  release(scratch);
  release(order);
  releasePartition(partition);
  job.phase = ROWS;
  job.at = 0;
  return fits ? OK : TOO_LARGE;
}

/** Children of each supernode, ascending, by counting. */
function listChildren(s: Symbolic): void {
  const start = s.childStart, count = s.supernodes;
  for (let t = 0; t <= count; ++t) setI32(start, t, 0);
  for (let t = 0; t < count; ++t) { const p = i32At(s.parent, t); if (p >= 0) setI32(start, p + 1, i32At(start, p + 1) + 1); }
  for (let t = 0; t < count; ++t) setI32(start, t + 1, i32At(start, t + 1) + i32At(start, t));
  for (let t = 0; t < count; ++t) {
    const p = i32At(s.parent, t);
    if (p < 0) continue;
    const at = i32At(start, p);
    setI32(s.children, at, t);
    setI32(start, p, at + 1);
  }
  for (let t = count; t > 0; --t) setI32(start, t, i32At(start, t - 1));
  setI32(start, 0, 0);
}

function advanceRows(job: Analysis, budget: f64): f64 {
  const s = <Symbolic>job.symbolic, blocks = s.blocks;
  let spent: f64 = 0;
  while (job.at < blocks && spent < budget) {
    const to = min(job.at + 4096, blocks);
    appendRows(s, <Halves>job.halves, job.step, job.label, job.blockSupernode, job.firstUnknown, job.fill, job.mark, job.at, to);
    spent += <f64>(to - job.at) * UNITS_ROWS * 8;
    job.at = to;
  }
  if (job.at == blocks) {
    for (let t = 0; t < s.supernodes; ++t) assert(i32At(job.fill, t) == i32At(s.rowStart, t + 1), "rows differ from counts");
    job.phase = RUNS;
    job.at = 0;
    job.found = 0;
  }
  return spent;
}

/** Negative when memory runs out. */
function advanceRuns(job: Analysis, budget: f64): f64 {
  const s = <Symbolic>job.symbolic, count = s.supernodes;
  if (!job.temporary) {
    job.temporary = allocateArray(2 * <f64>i32At(s.rowStart, count) + 2, 2); // a run a row at worst
    if (!job.temporary) return -1;
  }
  let spent: f64 = 0;
  for (; job.at < count && spent < budget; ++job.at) {
    job.found = childRuns(s, job.at, job.local, job.temporary, job.found);
    spent += 20 + UNITS_RUNS * <f64>(i32At(s.rowStart, job.at + 1) - i32At(s.rowStart, job.at));
  }
  if (job.at < count) return spent;
  s.runs = allocateArray(2 * <f64>job.found + 1, 2);
  if (!s.runs) return -1;
  memory.copy(s.runs, job.temporary, <usize>job.found << 3);
  release(job.temporary);
  job.temporary = 0;
  job.phase = COUNT;
  job.at = 0;
  return spent;
}

/** Negative when memory runs out. */
function advanceRecords(job: Analysis, budget: f64): f64 {
  const s = <Symbolic>job.symbolic, n = job.n, blockOf = (<Blocks>job.blocks).blockOf;
  let spent: f64 = 0;
  if (job.phase == COUNT || job.phase == WRITE) {
    while (job.at < n && spent < budget) {
      const to = min(job.at + 4096, n);
      if (job.phase == COUNT) countRecords(s, job.columnStart, job.rowIndex, blockOf, job.at, to);
      else writeRecords(s, job.columnStart, job.rowIndex, blockOf, job.fill, job.temporary, job.at, to);
      spent += UNITS_RECORDS * <f64>(i32At(job.columnStart, to) - i32At(job.columnStart, job.at));
      job.at = to;
    }
    if (job.at < n) return spent;
    job.at = 0;
    if (job.phase == WRITE) { job.phase = RESOLVE; return spent; }
    if (!makeRecordRoom(s, job.fill)) return -1;
    job.temporary = allocateArray(<f64>i32At(s.recordStart, s.supernodes) + 1, 2);
    if (!job.temporary) return -1;
    job.phase = WRITE;
    return spent;
  }
  for (; job.at < s.supernodes && spent < budget; ++job.at) {
    resolveRecords(s, job.at, job.temporary, job.local);
    spent += 20 + UNITS_RUNS * <f64>(i32At(s.recordStart, job.at + 1) - i32At(s.recordStart, job.at));
  }
  if (job.at == s.supernodes) {
    s.bytes = 4 * (3 * <f64>n + 12 * <f64>s.supernodes + <f64>i32At(s.rowStart, s.supernodes) + 2 * <f64>job.found
      + 3 * <f64>i32At(s.recordStart, s.supernodes));
    job.phase = FINISHED;
  }
  return spent;
}
