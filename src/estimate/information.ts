// The information matrix Σ Jᵀ R⁻¹ J and vector Σ Jᵀ R⁻¹ r of whitened rows, by blocks of states, summed in the kernel.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyFloats, copyInts, Loan, requireMemory } from "../../bindings/memory.js";
import { runSteps, type SlicedCall, type Steps } from "../../bindings/slices.js";
import type { WhitenedRows } from "./whitened.js";

/** Lower triangle by columns, rows ascending, the diagonal first; every state's block is whole. */
export interface Information {
  readonly order: number;
  readonly columnPointers: Int32Array;
  readonly rowIndices: Int32Array;
  readonly values: Float64Array;
  /** Unknowns of each state, in the order given. */
  readonly blockSizes: Int32Array;
  readonly vector: Float64Array;
}

/** The same in kernel memory, by addresses. */
export interface KernelInformation {
  readonly order: number;
  readonly states: number;
  /** i32[states]. */
  readonly blockSizes: number;
  /** i32[order]: the state of each unknown. */
  readonly stateOf: number;
  readonly columnPointers: number;
  readonly rowIndices: number;
  readonly values: number;
  readonly vector: number;
  /** The kernel's assembly with the rows still laid out, for orthogonal elimination; undefined when they were not kept. */
  readonly assembly: number | undefined;
  giveBack(): void;
}

/** Share of the work that laying the rows out in kernel memory takes, about. */
const LAYING_SHARE = 0.4;
/** Nanoseconds for one measurement, about: it sets where slices end. */
const MEASUREMENT_TIME = 100;

/** Sums up `rows` over the states 0 … sizes.length − 1; `place` gives each state id its number there. It holds kernel memory until it is
 *  given back.  @param keepRows whether the rows stay laid out until then.  Cost: O(pairs of states in one measurement), with counting sorts, and their block products. */
export function* assemblySteps(
  sizes: Int32Array,
  place: (state: number) => number,
  rows: readonly WhitenedRows[],
  keepRows: boolean,
): Steps<KernelInformation> {
  const k = kernel();
  const what = "The information matrix";
  const kept = new Loan(what);
  const input = new Loan(what);
  let job = 0;
  let taken = false;
  try {
    let reads = 0;
    let numbers = 0;
    for (const { states, blocks, residual } of rows) {
      reads += states.length;
      numbers += residual.length;
      for (const block of blocks) numbers += block.length;
    }
    requireMemory(what, 8 * numbers + 8 * reads + 16 * rows.length);
    const blockSizes = kept.ints(sizes);
    const layout = new Layout(input, rows, place, reads, numbers);
    yield layout;
    job = addressOrThrow(
      what,
      k.assemblyBegin(sizes.length, blockSizes, rows.length, layout.readStart, layout.reads, layout.counts, layout.numbers),
      16 * reads,
    );
    const result = yield {
      advance: (budget) => k.assemblyAdvance(job, budget),
      progress: () => k.assemblyProgress(job),
      from: LAYING_SHARE,
      to: 1,
    };
    if (result === status.outOfMemory) throw new MemoryLimitError(what, 12 * numbers, bytesAvailable());
    const made: KernelInformation = {
      order: k.assemblyOrder(job),
      states: sizes.length,
      blockSizes,
      stateOf: k.assemblyStateOf(job) >>> 0,
      columnPointers: k.assemblyColumnStart(job) >>> 0,
      rowIndices: k.assemblyRowIndex(job) >>> 0,
      values: k.assemblyValues(job) >>> 0,
      vector: k.assemblyVector(job) >>> 0,
      assembly: keepRows ? job : undefined,
      giveBack: releaser(job, kept, input),
    };
    taken = true;
    return made;
  } finally {
    if (!taken || !keepRows) input.giveBack();
    if (!taken) {
      if (job) k.assemblyRelease(job);
      kept.giveBack();
    }
  }
}

function releaser(job: number, kept: Loan, input: Loan): () => void {
  return () => {
    kernel().assemblyRelease(job);
    kept.giveBack();
    input.giveBack();
  };
}

/** Lays rows out in kernel memory, some measurements a slice. */
class Layout implements SlicedCall {
  readonly readStart: number;
  readonly reads: number;
  readonly counts: number;
  readonly numbers: number;
  readonly from = 0;
  readonly to = LAYING_SHARE;
  readonly #rows: readonly WhitenedRows[];
  readonly #place: (state: number) => number;
  #at = 0;
  #read = 0;
  #number = 0;
  readonly #allReads: number;
  readonly #allNumbers: number;

  constructor(loan: Loan, rows: readonly WhitenedRows[], place: (state: number) => number, reads: number, numbers: number) {
    this.#rows = rows;
    this.#place = place;
    this.#allReads = reads;
    this.#allNumbers = numbers;
    this.readStart = loan.room(4 * (rows.length + 1));
    this.reads = loan.room(4 * reads);
    this.counts = loan.room(4 * rows.length);
    this.numbers = loan.room(8 * numbers);
  }

  advance(budget: number): number {
    const rows = this.#rows;
    const { buffer } = kernel().memory;
    const readStart = new Int32Array(buffer, this.readStart, rows.length + 1);
    const reads = new Int32Array(buffer, this.reads, this.#allReads);
    const counts = new Int32Array(buffer, this.counts, rows.length);
    const numbers = new Float64Array(buffer, this.numbers, this.#allNumbers);
    const end = Math.min(rows.length, this.#at + 1 + Math.floor(budget / MEASUREMENT_TIME));
    let read = this.#read;
    let number = this.#number;
    for (let k = this.#at; k < end; k += 1) {
      const { states, blocks, residual } = rows[k]!;
      readStart[k] = read;
      counts[k] = residual.length;
      for (let s = 0; s < states.length; s += 1) {
        reads[read++] = this.#place(states[s]!);
        const block = blocks[s]!;
        for (let p = 0; p < block.length; p += 1) numbers[number++] = block[p]!;
      }
      for (let q = 0; q < residual.length; q += 1) numbers[number++] = residual[q]!;
    }
    readStart[end] = read;
    this.#at = end;
    this.#read = read;
    this.#number = number;
    return end === rows.length ? status.ok : status.running;
  }

  progress(): number {
    return this.#rows.length === 0 ? 1 : this.#at / this.#rows.length;
  }
}

/** As `assemblySteps`, at once, and copied out of kernel memory. */
export function assembleInformation(sizes: Int32Array, place: (state: number) => number, rows: readonly WhitenedRows[]): Information {
  const made = runSteps(assemblySteps(sizes, place, rows, false));
  try {
    const columnPointers = copyInts(made.columnPointers, made.order + 1);
    const nonzeros = columnPointers[made.order]!;
    return {
      order: made.order,
      columnPointers,
      rowIndices: copyInts(made.rowIndices, nonzeros),
      values: copyFloats(made.values, nonzeros),
      blockSizes: sizes,
      vector: copyFloats(made.vector, made.order),
    };
  } finally {
    made.giveBack();
  }
}
