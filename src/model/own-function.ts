import { SigmatideError } from "../errors.js";
import { centralDifferences } from "./central-differences.js";
import { type Quantity, wrapAngle } from "./quantities.js";
import { type ReadingForm, type ReadingKind, vectorForm } from "./reading-form.js";
import type { StateAt, StateKindName } from "./states.js";

/** A measurement function of the user's own. `values` are the states' stored values, in the order of `states`. */
export interface OwnFunction {
  /** Named in errors and warnings. */
  readonly name: string;
  /** The kind of each state, in order. */
  readonly states: readonly StateKindName[];
  /** What each predicted number measures; an `angle` wraps. Default: one plain number. */
  readonly quantities?: readonly Quantity[];
  readonly predict: (values: readonly Float64Array[]) => ArrayLike<number>;
  /** One row-major rows × dimension matrix a state, in its local coordinates. Without it, central differences serve. */
  readonly jacobians?: (values: readonly Float64Array[]) => readonly ArrayLike<number>[];
  /** Told, at most once, when `jacobians` disagrees with central differences at the first linearization. */
  readonly onWarning?: (warning: JacobianWarning) => void;
}

/** A Jacobian that central differences contradict. */
export interface JacobianWarning {
  readonly code: "JACOBIAN_DISAGREES";
  readonly message: string;
  /** Position in `states`. */
  readonly state: number;
  readonly row: number;
  readonly column: number;
  readonly given: number;
  readonly numerical: number;
}

/** A given entry is doubted when it is further from the numerical one than this many times the numerical one's own uncertainty… */
const doubtFactor = 20;
/** …and than this share of the largest entry of its row: below it a difference would not change an answer. */
const doubtShare = 1e-6;

/**
 * A kind of reading from a function of the user's own.
 * @throws {SigmatideError} `BAD_FUNCTION`, when it is called: a prediction or a Jacobian of the wrong length, or with a number that is not finite.
 */
export function ownFunction(definition: OwnFunction): ReadingKind {
  const { name, states, quantities = ["plain"], jacobians } = definition;
  const rows = quantities.length;
  let checked = jacobians === undefined;

  const predict = (values: readonly Float64Array[]) =>
    finite(definition.predict(values.map((value) => value.slice())), rows, name, "prediction");
  const difference = (from: Float64Array, to: Float64Array) =>
    to.map((number, k) => (quantities[k] === "angle" ? wrapAngle(number - from[k]!) : number - from[k]!));
  const numerical = (at: readonly StateAt[], moved: number) =>
    centralDifferences(at[moved]!, (value) => predict(at.map((state, k) => (k === moved ? value : state.value))), difference);

  const form: ReadingForm = vectorForm({
    states: states.map((kind) => [kind]),
    quantities,
    predict: (at) => predict(at.map((state) => state.value)),
    jacobians(at) {
      if (!jacobians) return at.map((_, k) => numerical(at, k).values);
      const given = jacobians(at.map((state) => state.value.slice()));
      if (given.length !== at.length)
        throw badFunction(name, `its Jacobians number ${given.length}, its states ${at.length}: give one matrix a state.`, given.length);
      const matrices = at.map((state, k) => finite(given[k]!, rows * state.kind.dimension, name, `Jacobian on state ${k}`));
      if (!checked) {
        checked = true;
        const warning = compare(name, at, matrices, rows, numerical);
        if (warning) definition.onWarning?.(warning);
      }
      return matrices;
    },
  });
  return { roles: states.map((kind, k) => `${kind} ${k}`), forms: [form] };
}

function compare(
  name: string,
  at: readonly StateAt[],
  given: readonly Float64Array[],
  rows: number,
  numerical: (at: readonly StateAt[], moved: number) => { values: Float64Array; uncertainty: Float64Array },
): JacobianWarning | undefined {
  for (const [state, matrix] of given.entries()) {
    const { values, uncertainty } = numerical(at, state);
    const columns = matrix.length / rows;
    for (let row = 0; row < rows; row++) {
      const largest = Math.max(...values.subarray(row * columns, (row + 1) * columns).map(Math.abs));
      for (let column = 0; column < columns; column++) {
        const k = row * columns + column;
        if (Math.abs(matrix[k]! - values[k]!) <= Math.max(doubtFactor * uncertainty[k]!, doubtShare * largest)) continue;
        const message =
          `The Jacobian of "${name}" with respect to "${at[state]!.name}", row ${row}, column ${column}, is ${matrix[k]} where central ` +
          `differences give ${values[k]}: check its sign, its units, and that it is taken in the state's local coordinates.`;
        return { code: "JACOBIAN_DISAGREES", message, state, row, column, given: matrix[k]!, numerical: values[k]! };
      }
    }
  }
  return undefined;
}

function finite(numbers: ArrayLike<number>, length: number, name: string, what: string): Float64Array {
  if (numbers.length !== length)
    throw badFunction(name, `its ${what} has ${numbers.length} numbers where ${length} are needed.`, numbers.length);
  const copy = Float64Array.from(numbers);
  const bad = copy.findIndex((number) => !Number.isFinite(number));
  if (bad >= 0)
    throw badFunction(name, `its ${what} is ${copy[bad]} at position ${bad}: it must be finite near the states' values.`, copy[bad]);
  return copy;
}

function badFunction(name: string, complaint: string, value: unknown): SigmatideError {
  return new SigmatideError("BAD_FUNCTION", `The function "${name}" cannot be used: ${complaint}`, { name, value });
}
