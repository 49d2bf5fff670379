import type { AdjustedState } from "./adjusted-state.js";
import type { EstimateLike } from "./estimate-like.js";

/** Damping begins here, relative to the information that each unknown has, and goes by tens. */
const first = 1e-3;
/** So little of it slows nothing down: it is taken off. */
const least = 1e-6;
/** Steps this short and still uphill: there is no way down. */
const most = 1e12;

/**
 * Step control: rows that hold each state to where it stands, added to the estimate while it is needed and withdrawn before anything is
 * reported. Weights are proportional to each unknown's own information, so that units do not matter.
 * Source: Levenberg (1944); Marquardt (1963), "An algorithm for least-squares estimation of nonlinear parameters", for scale and tens.
 */
export class Damping {
  strength = 0;
  readonly #estimate: EstimateLike;
  #rows: number[] = [];

  constructor(estimate: EstimateLike) {
    this.#estimate = estimate;
  }

  /** After an uphill step. @returns false when no more of it helps. */
  strengthen(states: Iterable<AdjustedState>): boolean {
    this.strength = this.strength === 0 ? first : this.strength * 10;
    if (this.strength > most) return false;
    this.#hold(states);
    return true;
  }

  /** After a downhill step. */
  weaken(states: Iterable<AdjustedState>): void {
    if (this.strength === 0) return;
    this.strength /= 10;
    if (this.strength < least) this.remove();
    else this.#hold(states);
  }

  remove(): void {
    this.strength = 0;
    for (const row of this.#rows) this.#estimate.withdraw(row);
    this.#rows = [];
  }

  #hold(states: Iterable<AdjustedState>): void {
    for (const row of this.#rows) this.#estimate.withdraw(row);
    this.#rows = [];
    for (const state of states) {
      if (state.id === undefined) continue;
      const n = state.kind.dimension;
      const matrix = (on: (k: number) => number) =>
        Float64Array.from({ length: n * n }, (_, k) => (k % (n + 1) === 0 ? on(k / (n + 1)) : 0));
      this.#rows.push(
        this.#estimate.addMeasurement({
          states: [state.id],
          jacobians: [matrix(() => 1)],
          residual: state.offset.slice(),
          // An unknown without information of its own moves with others alone: any small weight holds it.
          information: matrix((k) => this.strength * (state.information[k]! || 1)),
        }),
      );
    }
  }
}
