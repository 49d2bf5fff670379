import type { StateAt, StateKind } from "../states.js";
import type { AdjustedReading } from "./adjusted-reading.js";

/**
 * A state under adjustment. The estimate's unknowns are offsets from `origin` in local coordinates; the present value is
 * `retract(origin, offset)`. The origin stays when readings are linearized anew, so that readings of different age share one unknown.
 */
export class AdjustedState {
  readonly name: string;
  readonly kind: StateKind;
  readonly fixed: boolean;
  readonly readings: Set<AdjustedReading> = new Set();
  /** In the estimate; a fixed state has none, a new one not yet. */
  id: number | undefined;
  /** What all its readings tell of each unknown by itself: the diagonal of Jᵀ R⁻¹ J. */
  readonly information: Float64Array;
  /** Information of forgotten neighbours hangs on the origin: it must not be moved. */
  anchored = false;
  /** Undefined until a starting value is known. */
  origin: Float64Array | undefined;
  offset: Float64Array;
  value: Float64Array | undefined;
  /** Made once for all the readings on the state. */
  #present: StateAt | undefined;
  #tried: Place | undefined;

  constructor(name: string, kind: StateKind, fixed: boolean, value: Float64Array | undefined) {
    this.name = name;
    this.kind = kind;
    this.fixed = fixed;
    this.offset = new Float64Array(kind.dimension);
    this.information = new Float64Array(kind.dimension);
    if (value) this.start(value);
  }

  start(value: Float64Array): void {
    this.origin = value;
    this.#stand({ offset: new Float64Array(this.kind.dimension), at: this.#stateAt(value) });
  }

  moveTo(offset: Float64Array): void {
    this.#stand(this.#place(offset));
  }

  /** Tries another offset: readings are fitted there until it is settled on or dropped. */
  try(offset: Float64Array): void {
    this.#tried = this.#place(offset);
  }

  settle(): void {
    if (this.#tried) this.#stand(this.#tried);
  }

  drop(): void {
    this.#tried = undefined;
  }

  /** At its present value. Only for a state that has one. */
  now(): StateAt {
    return this.#present!;
  }

  /** At the offset that is being tried; if none is, at its present value. */
  tried(): StateAt {
    return this.#tried?.at ?? this.#present!;
  }

  triedOffset(): Float64Array {
    return this.#tried?.offset ?? this.offset;
  }

  #place(offset: Float64Array): Place {
    return { offset, at: this.#stateAt(this.kind.retract(this.origin!, offset)) };
  }

  #stateAt(value: Float64Array): StateAt {
    return { name: this.name, kind: this.kind, value };
  }

  #stand({ offset, at }: Place): void {
    this.offset = offset;
    this.value = at.value;
    this.#present = at;
    this.#tried = undefined;
  }
}

interface Place {
  readonly offset: Float64Array;
  readonly at: StateAt;
}
