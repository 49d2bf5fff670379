// A base: the factor of the information matrix as it stood at a rebase, with a fresh ledger on it.
import { MemoryLimitError } from "../../bindings/errors.js";
import { status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { addressOrThrow, bytesAvailable, copyInts, Loan, requireMemory, withLoan } from "../../bindings/memory.js";
import type { Information } from "./information.js";
import type { BaseCosts } from "./policy.js";

const ANALYSIS_SHARE = 0.4;

/** Kernel objects of one base; `free` gives them back. */
export interface Base {
  readonly symbolic: number;
  readonly factor: number;
  ledger: number;
  /** State numbers (places in the information matrix) by slot. */
  readonly stateOfSlot: Int32Array;
  readonly costs: BaseCosts;
  /** max Λ[j, j] ÷ L[j, j]²: how far elimination shrank a pivot, a lower bound on the condition of Λ scaled to unit diagonal. */
  readonly pivotSpread: number;
  /** A fresh ledger on the same factor; the one before is given back. */
  renewLedger(): void;
  free(): void;
}

/** The information matrix is not safely positive definite. */
export interface Singular {
  /** Unknown of the information matrix whose pivot failed. */
  readonly unknown: number;
  readonly pivot: number;
}

/** Builds a base, at once or in slices. */
export class BaseBuilder {
  readonly #k = kernel();
  readonly #loan = new Loan("A new base");
  readonly #information: Information;
  readonly #columnStart: number;
  readonly #rowIndex: number;
  readonly #values: number;
  #analysis = 0;
  #symbolic = 0;
  #factor = 0;
  #taken = false;

  /** @param queries marginals that the base will be asked for, for the choice of its order. */
  constructor(information: Information, queries: number) {
    this.#information = information;
    try {
      this.#columnStart = this.#loan.ints(information.columnPointers);
      this.#rowIndex = this.#loan.ints(information.rowIndices);
      this.#values = this.#loan.floats(information.values);
      const sizes = this.#loan.ints(information.blockSizes);
      const { order, blockSizes } = information;
      this.#analysis = addressOrThrow("A new base", this.#k.analysisBegin(order, this.#columnStart, this.#rowIndex, blockSizes.length, sizes, 0, 0, queries), 256);
    } catch (error) {
      this.free();
      throw error;
    }
  }

  /** Work done ÷ work predicted. */
  progress(): number {
    if (this.#factor) return ANALYSIS_SHARE + (1 - ANALYSIS_SHARE) * this.#k.factorProgress(this.#factor);
    return ANALYSIS_SHARE * this.#k.analysisProgress(this.#analysis);
  }

  /** Does about `budget` nanoseconds of work. True when the factor is complete; a `Singular` when there is none. */
  advance(budget: number): boolean | Singular {
    const k = this.#k;
    if (!this.#factor) {
      const result = k.analysisAdvance(this.#analysis, budget);
      if (result === status.running) return false;
      if (result === status.tooLarge) throw new MemoryLimitError("The factor", 2 ** 32, bytesAvailable());
      if (result === status.outOfMemory) throw new MemoryLimitError("The analysis of the pattern", 4 * this.#information.order, bytesAvailable());
      this.#symbolic = addressOrThrow("The analysis of the pattern", k.analysisFinish(this.#analysis), 0);
      k.analysisRelease(this.#analysis);
      this.#analysis = 0;
      const bytes = k.factorBytes(this.#symbolic);
      requireMemory("The factor", bytes);
      this.#factor = addressOrThrow("The factor", k.factorCreate(this.#symbolic), bytes);
      k.factorBegin(this.#factor, this.#values);
      return false;
    }
    const result = k.factorAdvance(this.#factor, budget);
    if (result === status.running) return false;
    if (result === status.ok) return true;
    return { unknown: result - 1, pivot: k.factorPivot(this.#factor) };
  }

  /** After `advance` has said true: the base with its ledger, right-hand side set. The builder is empty then. */
  finish(): Base {
    const k = this.#k;
    const { order, blockSizes, vector } = this.#information;
    const symbolic = this.#symbolic;
    const factor = this.#factor;
    const elimination = copyInts(k.symbolicOrder(symbolic) >>> 0, order);
    const stateOf = new Int32Array(order);
    for (let s = 0, u = 0; s < blockSizes.length; s += 1) for (let t = 0; t < blockSizes[s]!; t += 1) stateOf[u++] = s;
    // Unknowns of one state follow one another in elimination order, since their blocks are whole.
    const stateOfSlot = new Int32Array(blockSizes.length);
    const dimensions = new Int32Array(blockSizes.length);
    for (let c = 0, slot = 0; c < order; slot += 1) {
      const s = stateOf[elimination[c]!]!;
      stateOfSlot[slot] = s;
      dimensions[slot] = blockSizes[s]!;
      c += blockSizes[s]!;
    }
    const eta = Float64Array.from(elimination, (unknown) => vector[unknown]!);
    const pivotSpread = this.#pivotSpread();
    const makeLedger = (): number =>
      withLoan("The ledger", (loan) => {
        const ledger = addressOrThrow("The ledger", k.ledgerCreate(factor, blockSizes.length, loan.ints(dimensions)), 16 * order);
        if (k.setRight(ledger, loan.floats(eta)) === status.ok) return ledger;
        k.ledgerRelease(ledger);
        throw new MemoryLimitError("The ledger", 16 * order, bytesAvailable());
      });
    const base: Base = {
      symbolic,
      factor,
      ledger: makeLedger(),
      stateOfSlot,
      pivotSpread,
      costs: {
        flops: k.symbolicFlops(symbolic),
        nonzeros: k.symbolicNonzeros(symbolic),
        bytes: k.factorBytes(symbolic),
        states: blockSizes.length,
      },
      renewLedger: () => {
        const ledger = makeLedger();
        k.ledgerRelease(base.ledger);
        base.ledger = ledger;
      },
      free: () => {
        k.ledgerRelease(base.ledger);
        k.factorRelease(factor);
        k.symbolicRelease(symbolic);
      },
    };
    this.#taken = true;
    this.#loan.giveBack();
    return base;
  }

  #pivotSpread(): number {
    const { order, columnPointers, values } = this.#information;
    return withLoan("The pivots", (loan) => {
      const diagonal = loan.floats(Float64Array.from({ length: order }, (_, j) => values[columnPointers[j]!]!));
      return this.#k.pivotSpread(this.#factor, diagonal);
    });
  }

  /** Gives back what was not taken by `finish`. */
  free(): void {
    if (this.#taken) return;
    this.#taken = true;
    if (this.#analysis) this.#k.analysisRelease(this.#analysis);
    if (this.#factor) this.#k.factorRelease(this.#factor);
    if (this.#symbolic) this.#k.symbolicRelease(this.#symbolic);
    this.#loan.giveBack();
  }
}
