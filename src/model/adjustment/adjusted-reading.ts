import { SigmatideError } from "../../errors.js";
import { wrapAngle } from "../quantities.js";
import type { Reading } from "../reading.js";
import type { ReadingForm, ReadingKind } from "../reading-form.js";
import type { RobustWeight } from "../robust.js";
import type { StateAt } from "../states.js";
import type { AdjustedState } from "./adjusted-state.js";
import type { Linearization, LinearMeasurement } from "./estimate-like.js";
import { type Whiten, whitener } from "./whiten.js";

/** How a reading fits a trial, lengths in standard deviations of the reading. */
export interface Fit {
  /** Twice its loss: the weighted square of its residual, if no robust weight bends it. */
  readonly cost: number;
  readonly weight: number;
  /** Length of the residual. */
  readonly residual: number;
  /** How far the linear model's residual is off. */
  readonly linearizationError: number;
  /** How far its Jacobian is off, each unknown in what it would be unsure by itself. Infinite when the residual was off already. */
  readonly jacobianChange: number;
}

/** Numbers of one reading on their way: fits are many, and hold no arrays of their own. */
let scratch = new Float64Array(16);
function room(length: number): Float64Array {
  if (scratch.length < length) scratch = new Float64Array(2 * length);
  return scratch;
}

const impossible: Fit = {
  cost: Number.POSITIVE_INFINITY,
  weight: 0,
  residual: Number.POSITIVE_INFINITY,
  linearizationError: Number.POSITIVE_INFINITY,
  jacobianChange: Number.POSITIVE_INFINITY,
};

/** A reading under adjustment, with the linear model of it that the estimate holds: residual = `residual` − Σ `jacobians` · offset. */
export class AdjustedReading {
  readonly reading: Reading<string | ReadingKind>;
  readonly states: readonly AdjustedState[];
  /** Those that are estimated. */
  readonly freeStates: readonly AdjustedState[];
  /** In the estimate, once it is there. */
  measurement: number | undefined;
  /** At the present values. */
  cost = 0;
  /** The robust weight in the linear model. */
  weight = 1;
  readonly #form: ReadingForm;
  readonly #robust: RobustWeight | undefined;
  readonly #whiten: Whiten;
  #model: Linearization = { jacobians: [], residual: new Float64Array() };
  /** Where the model was made. */
  #offsetsWhenMade: Float64Array[] = [];
  /** Whether the model is part of its free states' information. */
  #informs = false;

  constructor(
    reading: Reading<string | ReadingKind>,
    form: ReadingForm,
    states: readonly AdjustedState[],
    robust: RobustWeight | undefined,
  ) {
    this.reading = reading;
    this.states = states;
    this.freeStates = states.some(({ fixed }) => fixed) ? states.filter(({ fixed }) => !fixed) : states;
    this.#form = form;
    this.#robust = robust;
    this.#whiten = whitener(reading);
  }

  /** Whether the linear model was made at the present values. */
  get isFresh(): boolean {
    return this.states.every(({ offset }, k) => offset === this.#offsetsWhenMade[k]);
  }

  /** Measured minus predicted at the present values. */
  residual(): Float64Array {
    return this.#residual(this.#now());
  }

  #now(): StateAt[] {
    return this.states.map((state) => state.now());
  }

  #residual(states: readonly StateAt[]): Float64Array {
    return this.#form.residual(states, this.reading.value, this.reading.setup);
  }

  /** The linear model at the present values, and the residual there. */
  modelHere(): { model: Linearization; residual: Float64Array } {
    const at = this.#now();
    const residual = this.#residual(at);
    const jacobians = this.#jacobians(at, false);
    const atOrigin = residual.slice();
    for (let k = 0; k < jacobians.length; k++) addProduct(atOrigin, jacobians[k]!, this.freeStates[k]!.offset, residual.length);
    return { model: { jacobians, residual: atOrigin }, residual };
  }

  /** A linear model of the reading as the estimate takes it. Its free states are in the estimate. */
  measurementOf(model: Linearization): LinearMeasurement {
    const { name, standardDeviations, covariance } = this.reading;
    return {
      ...model,
      states: this.freeStates.map(({ id }) => id!),
      ...(standardDeviations ? { standardDeviations } : { covariance: covariance! }),
      ...(name === undefined ? {} : { name }),
    };
  }

  /**
   * Linearizes at the present values, in the states' offsets from their origins, and takes the cost and the weight there.
   * @returns the model as the estimate is to hold it, scaled by the root of the robust weight.
   */
  linearize(): Linearization {
    const { model, residual } = this.modelHere();
    const { jacobians, residual: atOrigin } = model;
    const { cost, weight } = this.#assess(residual);
    if (!Number.isFinite(cost)) throw this.#notFinite(residual);
    this.leave();
    this.#model = model;
    this.#offsetsWhenMade = this.states.map(({ offset }) => offset);
    this.cost = cost;
    this.weight = weight;
    this.#inform(1);
    this.#informs = true;
    const scale = Math.sqrt(weight);
    const scaled = (numbers: Float64Array) => numbers.map((number) => number * scale);
    return weight === 1 ? this.#model : { jacobians: jacobians.map(scaled), residual: scaled(atOrigin) };
  }

  /** Takes its part out of its states' information. */
  leave(): void {
    if (this.#informs) this.#inform(-1);
    this.#informs = false;
  }

  /** Adds what the model tells of each unknown by itself to its states' information, or takes it out. */
  #inform(sign: 1 | -1): void {
    const { jacobians } = this.#model;
    for (let k = 0; k < jacobians.length; k++) {
      const { information } = this.freeStates[k]!;
      for (let j = 0; j < information.length; j++) {
        const square = this.weight * this.#columnSquare(jacobians[k]!, information.length, j);
        information[j] = Math.max(0, information[j]! + sign * square);
      }
    }
  }

  /**
   * How it fits where its states are tried. A trial where it cannot be predicted fits infinitely badly.
   * @param tolerance of the linear model's residual: when it is off by more, the Jacobian is not looked at.
   */
  fit(tolerance: number): Fit {
    const at = this.states.map((state) => state.tried());
    try {
      const residual = this.#residual(at);
      const linearizationError = this.#linearizationError(residual);
      const jacobianChange = linearizationError <= tolerance ? this.#jacobianChange(this.#jacobians(at, true)) : Number.POSITIVE_INFINITY;
      const { cost, weight, residual: length } = this.#assess(residual);
      return { cost, weight, residual: length, linearizationError, jacobianChange };
    } catch (error) {
      if (error instanceof SigmatideError) return impossible;
      throw error;
    }
  }

  #linearizationError(residual: Float64Array): number {
    const rows = residual.length;
    const off = room(rows);
    const { jacobians, residual: atOrigin } = this.#model;
    for (let i = 0; i < rows; i++) off[i] = residual[i]! - atOrigin[i]!;
    for (let k = 0; k < jacobians.length; k++) addProduct(off, jacobians[k]!, this.freeStates[k]!.triedOffset(), rows);
    for (let i = 0; i < rows; i++) if (this.#form.rowQuantities[i] === "angle") off[i] = wrapAngle(off[i]!);
    return this.#whiteLength(off, rows);
  }

  /** Jacobians on the free states at these values, in the offsets from their origins. */
  #jacobians(at: readonly StateAt[], tried: boolean): Float64Array[] {
    const all = this.#form.jacobians(at, this.reading.value, this.reading.setup);
    const free: Float64Array[] = [];
    for (let k = 0; k < all.length; k++) {
      const state = this.states[k]!;
      if (!state.fixed) free.push(multiplyChart(all[k]!, state, tried ? state.triedOffset() : state.offset));
    }
    return free;
  }

  /** Over the free states, the largest change of the Jacobian since the model was made. */
  #jacobianChange(jacobians: readonly Float64Array[]): number {
    let largest = 0;
    for (let k = 0; k < jacobians.length; k++) {
      const { information } = this.freeStates[k]!;
      let sum = 0;
      for (let j = 0; j < information.length; j++) {
        const square = this.#columnSquare(jacobians[k]!, information.length, j, this.#model.jacobians[k]!);
        if (square !== 0) sum += square / information[j]!;
      }
      largest = Math.max(largest, Math.sqrt(sum));
    }
    return largest;
  }

  /** The squared length of one whitened column, or of its difference from another. */
  #columnSquare(jacobian: Float64Array, columns: number, j: number, minus?: Float64Array): number {
    const rows = jacobian.length / columns;
    const column = room(rows);
    for (let i = 0; i < rows; i++) column[i] = jacobian[i * columns + j]! - (minus ? minus[i * columns + j]! : 0);
    return this.#whiteLength(column, rows) ** 2;
  }

  /** The length of the first `rows` numbers in standard deviations of the reading; they are whitened in place. */
  #whiteLength(numbers: Float64Array, rows: number): number {
    this.#whiten(numbers);
    if (rows === 1) return Math.abs(numbers[0]!);
    let sum = 0;
    for (let i = 0; i < rows; i++) sum += numbers[i]! * numbers[i]!;
    return Math.sqrt(sum);
  }

  #assess(residual: Float64Array): Pick<Fit, "cost" | "weight" | "residual"> {
    const white = room(residual.length);
    for (let i = 0; i < residual.length; i++) white[i] = residual[i]!;
    const u = this.#whiteLength(white, residual.length);
    if (this.#robust === undefined) return { cost: u * u, weight: 1, residual: u };
    return { cost: 2 * this.#robust.loss(u), weight: this.#robust.weight(u), residual: u };
  }

  #notFinite(residual: Float64Array): SigmatideError {
    const { reading, states } = this;
    const called = reading.name === undefined ? `The reading on ${states.map(({ name }) => name).join(", ")}` : `Reading "${reading.name}"`;
    return new SigmatideError(
      "BAD_START",
      `${called} has the residual ${Array.from(residual).join(", ")} at its states' values: start ${states.map(({ name }) => name).join(", ")} from values where it can be predicted.`,
      { reading: reading.name, states: states.map(({ name }) => name) },
    );
  }
}

/** J T, with T how local coordinates at this offset follow those at the origin. */
function multiplyChart(jacobian: Float64Array, { kind }: AdjustedState, offset: Float64Array): Float64Array {
  const chart = kind.chart(offset);
  if (chart === undefined) return jacobian;
  const n = kind.dimension;
  return Float64Array.from(jacobian, (_, at) => {
    const [row, column] = [Math.floor(at / n), at % n];
    let sum = 0;
    for (let k = 0; k < n; k++) sum += jacobian[row * n + k]! * chart[k * n + column]!;
    return sum;
  });
}

/** y += A x over the first `rows` rows, A row-major. */
function addProduct(y: Float64Array, a: Float64Array, x: Float64Array, rows: number): void {
  const columns = x.length;
  for (let i = 0; i < rows; i++) for (let j = 0; j < columns; j++) y[i]! += a[i * columns + j]! * x[j]!;
}
