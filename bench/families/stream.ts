// A stream of measurements in order of arrival, kept in flat arrays so that a million of them fit.
import type { Random } from "./random.js";

export interface Measurement {
  /** Which states it reads, by index of arrival. */
  readonly states: number[];
  /** One block a state, rows × dimension of that state, row-major: the derivative of the prediction. */
  readonly jacobians: Float64Array[];
  /** Measured minus predicted, one number a row. */
  readonly residual: Float64Array;
  /** Independent noise, one standard deviation a row. */
  readonly standardDeviations: Float64Array;
}

/** At each step some states arrive, then the measurements that a caller would commit together. */
export interface Step {
  readonly firstState: number;
  readonly lastState: number;
  readonly firstMeasurement: number;
  readonly lastMeasurement: number;
}

/** A number list that grows by doubling. */
class Numbers {
  #values = new Float64Array(1024);
  length = 0;
  push(value: number): void {
    if (this.length === this.#values.length) {
      const grown = new Float64Array(2 * this.length);
      grown.set(this.#values);
      this.#values = grown;
    }
    this.#values[this.length] = value;
    this.length += 1;
  }
  at(k: number): number {
    return this.#values[k]!;
  }
  copy(from: number, to: number): Float64Array {
    return this.#values.slice(from, to);
  }
}

export class Stream {
  readonly #dimensions = new Numbers();
  readonly #stateEnd = new Numbers();
  readonly #measurementEnd = new Numbers();
  readonly #statesEnd = new Numbers();
  readonly #rowsEnd = new Numbers();
  readonly #blocksEnd = new Numbers();
  readonly #states = new Numbers();
  readonly #jacobians = new Numbers();
  readonly #residual = new Numbers();
  readonly #deviations = new Numbers();

  constructor(private readonly noise: Random) {}

  get states(): number {
    return this.#dimensions.length;
  }
  get measurements(): number {
    return this.#statesEnd.length;
  }
  get steps(): number {
    return this.#stateEnd.length;
  }
  dimension(state: number): number {
    return this.#dimensions.at(state);
  }

  addState(dimension: number): number {
    this.#dimensions.push(dimension);
    return this.#dimensions.length - 1;
  }

  /** Adds a measurement whose residual is drawn from its noise: the linearization point is the truth. */
  addMeasurement(states: readonly number[], jacobians: readonly ArrayLike<number>[], standardDeviations: readonly number[]): void {
    for (const state of states) this.#states.push(state);
    for (const block of jacobians) for (let k = 0; k < block.length; k += 1) this.#jacobians.push(block[k]!);
    for (const deviation of standardDeviations) {
      this.#deviations.push(deviation);
      this.#residual.push(deviation * this.noise.normal());
    }
    this.#statesEnd.push(this.#states.length);
    this.#rowsEnd.push(this.#residual.length);
    this.#blocksEnd.push(this.#jacobians.length);
  }

  endStep(): void {
    this.#stateEnd.push(this.#dimensions.length);
    this.#measurementEnd.push(this.#statesEnd.length);
  }

  step(s: number): Step {
    const before = (ends: Numbers): number => (s === 0 ? 0 : ends.at(s - 1));
    return {
      firstState: before(this.#stateEnd),
      lastState: this.#stateEnd.at(s),
      firstMeasurement: before(this.#measurementEnd),
      lastMeasurement: this.#measurementEnd.at(s),
    };
  }

  measurement(k: number): Measurement {
    const before = (ends: Numbers): number => (k === 0 ? 0 : ends.at(k - 1));
    const states = Array.from(this.#states.copy(before(this.#statesEnd), this.#statesEnd.at(k)));
    const [firstRow, lastRow] = [before(this.#rowsEnd), this.#rowsEnd.at(k)];
    let at = before(this.#blocksEnd);
    const jacobians = states.map((state) => {
      const from = at;
      at += (lastRow - firstRow) * this.dimension(state);
      return this.#jacobians.copy(from, at);
    });
    return {
      states,
      jacobians,
      residual: this.#residual.copy(firstRow, lastRow),
      standardDeviations: this.#deviations.copy(firstRow, lastRow),
    };
  }
}
