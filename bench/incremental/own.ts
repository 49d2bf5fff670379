// Our own supernodal recomputation of what an eager step keeps current, on the matrix of one step, order and analysis known: numbers of the
// factor, selected inverse with its diagonal blocks, newest block column, all copied out. The kernel is called directly, so no checks and no
// copies of the facade are in the times.
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { copyFloats, copyInts, Loan } from "../../bindings/memory.js";
import { runSteps } from "../../bindings/slices.js";
import { type Base, baseSteps, isSingular } from "../../src/estimate/base.js";
import type { KernelInformation } from "../../src/estimate/information.js";
import type { Information } from "../families/information.js";

/** Marginals that an estimate tells the analysis to expect from a base: its order is chosen for them. */
const QUERIES = 1000;

export interface OwnTimes {
  /** Milliseconds: the parts of one recomputation, and of one solution by forward and backward solve. */
  readonly factor: number;
  readonly inverse: number;
  readonly column: number;
  readonly solve: number;
}

export class Own {
  readonly #k = kernel();
  readonly #base: Base;
  readonly #loan = new Loan("The bench");
  readonly #values: number;
  readonly #right: number;
  readonly #places: number;
  readonly #blocks: number;
  readonly #blockNumbers: number;
  readonly #newest: { readonly slot: number; readonly dimension: number };
  readonly #order: number;

  /** Takes the order that an estimate's base would have. */
  constructor(information: Information) {
    const base = runSteps(
      baseSteps(inKernel(information, this.#loan), { queries: QUERIES, memoryLimit: Number.POSITIVE_INFINITY, route: "information" }),
    );
    if (isSingular(base)) throw new Error(`the matrix of the step is singular at unknown ${base.unknown}`);
    const { blockSizes, values, vector } = information;
    this.#base = base;
    this.#order = information.order;
    this.#values = this.#loan.floats(values);
    this.#blockNumbers = blockSizes.reduce((sum, d) => sum + d * d, 0);
    this.#blocks = this.#loan.room(8 * this.#blockNumbers);
    this.#places = this.#loan.ints(placesOf(blockSizes, base.stateOfSlot));
    this.#right = this.#loan.floats(Float64Array.from(this.elimination(), (unknown) => vector[unknown]!));
    this.#newest = { slot: base.stateOfSlot.indexOf(blockSizes.length - 1), dimension: blockSizes.at(-1)! };
  }

  get factorBytes(): number {
    return this.#base.costs.bytes;
  }

  /** The unknown eliminated k-th. */
  elimination(): Int32Array {
    return copyInts(this.#k.symbolicOrder(this.#base.symbolic) >>> 0, this.#order);
  }

  /** Medians of the parts over some repeats, after one to warm up. */
  times(repeats: number): OwnTimes {
    const runs = Array.from({ length: repeats + 1 }, () => this.#once()).slice(1);
    const median = (part: keyof OwnTimes): number => runs.map((run) => run[part]).sort((a, b) => a - b)[repeats >> 1]!;
    return { factor: median("factor"), inverse: median("inverse"), column: median("column"), solve: median("solve") };
  }

  #once(): OwnTimes {
    const k = this.#k;
    const { factor, ledger } = this.#base;
    const { slot, dimension } = this.#newest;
    const begun = performance.now();
    k.factorBegin(factor, this.#values);
    while (k.factorAdvance(factor, 1e18) === status.running);
    const factored = performance.now();
    const inverse = k.inverseBegin(factor, 1) >>> 0;
    while (k.inverseAdvance(inverse, 1e18) === status.running);
    k.blocksOfInverse(ledger, inverse, this.#places, this.#blocks);
    k.inverseRelease(inverse);
    copyFloats(this.#blocks, this.#blockNumbers);
    const inverted = performance.now();
    k.beginColumns(ledger, dimension);
    k.loadUnits(ledger, 0, slot);
    k.carryForward(ledger);
    k.carryBack(ledger);
    copyFloats(k.ledgerX(ledger) >>> 0, this.#order * dimension);
    k.clearColumns(ledger);
    const carried = performance.now();
    k.setRight(ledger, this.#right);
    k.solveEstimate(ledger);
    copyFloats(k.ledgerX(ledger) >>> 0, this.#order);
    k.clearColumns(ledger);
    const solved = performance.now();
    return { factor: factored - begun, inverse: inverted - factored, column: carried - inverted, solve: solved - carried };
  }

  free(): void {
    this.#loan.giveBack();
    this.#base.free();
  }
}

/** The matrix in kernel memory, for as long as the loan lasts. */
function inKernel({ order, columnPointers, rowIndices, values, blockSizes, vector }: Information, loan: Loan): KernelInformation {
  const stateOf = new Int32Array(order);
  for (let s = 0, u = 0; s < blockSizes.length; s += 1) for (let t = 0; t < blockSizes[s]!; t += 1) stateOf[u++] = s;
  return {
    order,
    states: blockSizes.length,
    blockSizes: loan.ints(blockSizes),
    stateOf: loan.ints(stateOf),
    columnPointers: loan.ints(columnPointers),
    rowIndices: loan.ints(rowIndices),
    values: loan.floats(values),
    vector: loan.floats(vector),
    assembly: undefined,
    giveBack: () => {},
  };
}

/** For each slot where its state's block lies in order of arrival, and its first unknown. */
function placesOf(dimensions: Int32Array, stateOfSlot: Int32Array): Int32Array {
  const [block, row] = [new Int32Array(dimensions.length + 1), new Int32Array(dimensions.length + 1)];
  for (const [state, d] of dimensions.entries()) {
    block[state + 1] = block[state]! + d * d;
    row[state + 1] = row[state]! + d;
  }
  const places = new Int32Array(2 * stateOfSlot.length);
  for (const [slot, state] of stateOfSlot.entries()) places.set([block[state]!, row[state]!], 2 * slot);
  return places;
}
