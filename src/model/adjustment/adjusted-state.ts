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
    this.value = value;
    this.offset = new Float64Array(this.kind.dimension);
  }

  /** The state at another offset from its origin. */
  at(offset: Float64Array): StateAt {
    return { name: this.name, kind: this.kind, value: this.kind.retract(this.origin!, offset) };
  }

  moveTo(offset: Float64Array): void {
    this.offset = offset;
    this.value = this.kind.retract(this.origin!, offset);
  }

  /** At its present value. Only for a state that has one. */
  now(): StateAt {
    return { name: this.name, kind: this.kind, value: this.value! };
  }
}
