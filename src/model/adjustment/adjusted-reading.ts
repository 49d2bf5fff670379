import { SigmatideError } from "../../errors.js";
import { wrapAngle } from "../quantities.js";
import type { Reading } from "../reading.js";
import type { ReadingForm, ReadingKind } from "../reading-form.js";
import type { RobustWeight } from "../robust.js";
import type { StateAt } from "../states.js";
import type { AdjustedState } from "./adjusted-state.js";
import type { Linearization, LinearMeasurement } from "./estimate-like.js";
import { type Whiten, whitener } from "./whiten.js";

/** Offsets of states that are being tried; the others stand where they are. */
export type Trial = ReadonlyMap<AdjustedState, Float64Array>;

/** How a reading fits a trial, lengths in standard deviations of the reading. */
export interface Fit {
  /** Twice its loss: the weighted square of its residual, if no robust weight bends it. */
  readonly cost: number;
  readonly weight: number;
  /** Length of the residual. */
  readonly residual: number;
  /** How far the linear model's residual is off. */
  readonly linearizationError: number;
  /** How far its Jacobian is off, each unknown in what it would be unsure by itself. */
  readonly jacobianChange: number;
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
  /** What it has added to the information of its free states. */
  #information: Float64Array[] = [];

  constructor(
    reading: Reading<string | ReadingKind>,
    form: ReadingForm,
    states: readonly AdjustedState[],
    robust: RobustWeight | undefined,
  ) {
    this.reading = reading;
    this.states = states;
    this.freeStates = states.filter(({ fixed }) => !fixed);
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
    return this.#residual(this.states.map((state) => state.now()));
  }

  #residual(states: readonly StateAt[]): Float64Array {
    return this.#form.residual(states, this.reading.value, this.reading.setup);
  }

  /** The linear model at the present values, and the residual there. */
  modelHere(): { model: Linearization; residual: Float64Array } {
    const at = this.states.map((state) => state.now());
    const residual = this.#residual(at);
    const jacobians = this.#jacobians(
      at,
      this.states.map(({ offset }) => offset),
    );
    const atOrigin = residual.slice();
    for (const [k, state] of this.freeStates.entries()) addProduct(atOrigin, jacobians[k]!, state.offset, 1);
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
    this.#model = model;
    this.#offsetsWhenMade = this.states.map(({ offset }) => offset);
    const { cost, weight } = this.#assess(residual);
    if (!Number.isFinite(cost)) throw this.#notFinite(residual);
    this.cost = cost;
    this.weight = weight;
    this.leave();
    this.#information = jacobians.map((jacobian, k) => {
      const squares = this.#columnSquares(jacobian, this.freeStates[k]!.kind.dimension).map((square) => square * weight);
      for (const [j, square] of squares.entries()) this.freeStates[k]!.information[j]! += square;
      return squares;
    });
    const scale = Math.sqrt(weight);
    const scaled = (numbers: Float64Array) => numbers.map((number) => number * scale);
    return weight === 1 ? this.#model : { jacobians: jacobians.map(scaled), residual: scaled(atOrigin) };
  }

  /** Takes its part out of its states' information. */
  leave(): void {
    for (const [k, squares] of this.#information.entries())
      for (const [j, square] of squares.entries()) {
        const { information } = this.freeStates[k]!;
        information[j] = Math.max(0, information[j]! - square);
      }
    this.#information = [];
  }

  /** How it fits at trial offsets. A trial where it cannot be predicted fits infinitely badly. */
  fit(trial: Trial): Fit {
    const offsets = this.states.map((state) => trial.get(state) ?? state.offset);
    const at = this.states.map((state, k) => (state.fixed ? state.now() : state.at(offsets[k]!)));
    try {
      const residual = this.#residual(at);
      const off = residual.map((number, k) => number - this.#model.residual[k]!);
      const free = offsets.filter((_, k) => !this.states[k]!.fixed);
      for (const [k, offset] of free.entries()) addProduct(off, this.#model.jacobians[k]!, offset, 1);
      const wrapped = off.map((number, k) => (this.#form.rowQuantities[k] === "angle" ? wrapAngle(number) : number));
      return {
        ...this.#assess(residual),
        linearizationError: Math.hypot(...this.#whiten(wrapped)),
        jacobianChange: this.#jacobianChange(this.#jacobians(at, offsets)),
      };
    } catch (error) {
      if (error instanceof SigmatideError) return impossible;
      throw error;
    }
  }

  /** Jacobians on the free states at these values, in the offsets from their origins. */
  #jacobians(at: readonly StateAt[], offsets: readonly Float64Array[]): Float64Array[] {
    const all = this.#form.jacobians(at, this.reading.value, this.reading.setup);
    return all.flatMap((jacobian, k) => (this.states[k]!.fixed ? [] : [multiplyChart(jacobian, this.states[k]!, offsets[k]!)]));
  }

  /** Over the free states, the largest change of the Jacobian since the model was made. */
  #jacobianChange(jacobians: readonly Float64Array[]): number {
    let largest = 0;
    for (const [k, state] of this.freeStates.entries()) {
      const change = jacobians[k]!.map((number, i) => number - this.#model.jacobians[k]![i]!);
      const squares = this.#columnSquares(change, state.kind.dimension);
      const sum = squares.reduce((total, square, j) => total + (square === 0 ? 0 : square / state.information[j]!), 0);
      largest = Math.max(largest, Math.sqrt(sum));
    }
    return largest;
  }

  /** The squared length of each whitened column. */
  #columnSquares(jacobian: Float64Array, columns: number): Float64Array {
    const rows = jacobian.length / columns;
    return Float64Array.from({ length: columns }, (_, j) => {
      const column = this.#whiten(Float64Array.from({ length: rows }, (_, i) => jacobian[i * columns + j]!));
      return column.reduce((sum, number) => sum + number * number, 0);
    });
  }

  #assess(residual: Float64Array): Pick<Fit, "cost" | "weight" | "residual"> {
    const u = Math.hypot(...this.#whiten(residual));
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

/** y += sign · A x, A row-major. */
function addProduct(y: Float64Array, a: Float64Array, x: Float64Array, sign: 1 | -1): void {
  const columns = x.length;
  for (let i = 0; i < y.length; i++) for (let j = 0; j < columns; j++) y[i]! += sign * a[i * columns + j]! * x[j]!;
}
