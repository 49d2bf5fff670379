// A least-squares estimate in double-double arithmetic on dense matrices: what tests hold the estimate's answers against. It adds up
// Λ = Σ Jᵀ R⁻¹ J and η = Σ Jᵀ R⁻¹ r from the numbers as given, and inverts Λ whole; slow, and good to about 30 digits less the condition.
import type { MeasurementInput } from "../../src/index.js";
import { add, type DoubleDouble, divide, multiply, subtract, twoProduct, zero } from "./double-double.js";
import { EnvelopeCholesky, type LowerColumns, type Pairs } from "./envelope.js";

type Nested = readonly ArrayLike<number>[];
const entry = (matrix: Float64Array | Nested, i: number, j: number, columns: number): number =>
  matrix instanceof Float64Array ? matrix[i * columns + j]! : matrix[i]![j]!;

/** Sums of pairs by place in a lower triangle, rounded nowhere but in the last of 31 digits. */
export class ExactSums {
  readonly #entries: Map<number, DoubleDouble>[] = [];
  readonly #right: DoubleDouble[] = [];

  /** Unknowns of the states, one after another. */
  constructor(readonly order: number) {
    for (let j = 0; j < order; j += 1) {
      this.#entries.push(new Map());
      this.#right.push(zero);
    }
  }

  /** Adds Jᵀ R⁻¹ J and Jᵀ R⁻¹ r; `first` gives the place of a state's first unknown, `dimensionOf` how many it has. */
  measure(
    { states, jacobians, residual, ...noise }: MeasurementInput,
    first: (state: number) => number,
    dimensionOf: (state: number) => number,
  ): void {
    const m = residual.length;
    const weight = exactWeights(noise, m);
    for (const [a, stateA] of states.entries()) {
      for (let u = 0; u < dimensionOf(stateA); u += 1) {
        const i = first(stateA) + u;
        // Row u of J_aᵀ R⁻¹.
        const weighted = Array.from({ length: m }, (_, r) => {
          let sum = zero;
          for (let q = 0; q < m; q += 1) {
            const value = entry(jacobians[a]!, q, u, dimensionOf(stateA));
            if (value !== 0) sum = add(sum, multiply([value, 0], weight[q]![r]!));
          }
          return sum;
        });
        for (let r = 0; r < m; r += 1) this.#right[i] = add(this.#right[i]!, multiply(weighted[r]!, [residual[r]!, 0]));
        for (const [b, stateB] of states.entries()) {
          for (let v = 0; v < dimensionOf(stateB); v += 1) {
            const j = first(stateB) + v;
            if (i < j) continue;
            let sum = this.#entries[j]!.get(i) ?? zero;
            for (let r = 0; r < m; r += 1) {
              const value = entry(jacobians[b]!, r, v, dimensionOf(stateB));
              if (value !== 0) sum = add(sum, multiply(weighted[r]!, [value, 0]));
            }
            this.#entries[j]!.set(i, sum);
          }
        }
      }
    }
  }

  /** Both parts of each pair as entries of their own: duplicates add up. */
  columns(): LowerColumns {
    const columnPointers = [0];
    const rowIndices: number[] = [];
    const values: number[] = [];
    for (const [j, column] of this.#entries.entries()) {
      if (!column.has(j)) column.set(j, zero);
      for (const i of [...column.keys()].sort((a, b) => a - b)) {
        for (const part of column.get(i)!) {
          rowIndices.push(i);
          values.push(part);
        }
      }
      columnPointers.push(values.length);
    }
    return { order: this.order, columnPointers, rowIndices, values };
  }

  get right(): readonly DoubleDouble[] {
    return this.#right;
  }
}

/** R⁻¹ in pairs. */
function exactWeights(
  { covariance, standardDeviations, information }: Omit<MeasurementInput, "states" | "jacobians" | "residual">,
  m: number,
): DoubleDouble[][] {
  if (standardDeviations)
    return Array.from({ length: m }, (_, q) =>
      Array.from({ length: m }, (__, r) => (q === r ? divide([1, 0], twoProduct(standardDeviations[q]!, standardDeviations[q]!)) : zero)),
    );
  const given = (covariance ?? information)!;
  if (information)
    return Array.from({ length: m }, (_, q) => Array.from({ length: m }, (__, r): DoubleDouble => [entry(given, q, r, m), 0]));
  const lower = { columnPointers: [0], rowIndices: [] as number[], values: [] as number[] };
  for (let j = 0; j < m; j += 1) {
    for (let i = j; i < m; i += 1) {
      lower.rowIndices.push(i);
      lower.values.push(entry(given, i, j, m));
    }
    lower.columnPointers.push(lower.values.length);
  }
  const factor = new EnvelopeCholesky({ order: m, ...lower });
  const inverse = Array.from({ length: m }, (_, j) => factor.inverseColumn(j));
  return Array.from({ length: m }, (_, q) => Array.from({ length: m }, (__, r) => inverse[r]!.get(q)));
}

/** Answers of the twin, rounded to doubles at the end. */
export class ExactAnswers {
  readonly #first = new Map<number, number>();
  readonly #dimension = new Map<number, number>();
  readonly #inverse: Pairs[];
  readonly #solution: DoubleDouble[];
  readonly order: number;
  readonly logDeterminant: number;
  /** ‖Λ‖₁ and ‖Λ⁻¹‖₁. */
  readonly norm: number;
  readonly normOfInverse: number;
  /** Largest entry of Λ⁻¹. */
  readonly largest: number;
  /** Σ rᵀ R⁻¹ r at the solution. */
  readonly weightedSquares: number;

  /** @throws when Λ is not positive definite. */
  constructor(states: readonly (readonly [id: number, dimension: number])[], measurements: readonly MeasurementInput[]) {
    let order = 0;
    for (const [id, dimension] of states) {
      this.#first.set(id, order);
      this.#dimension.set(id, dimension);
      order += dimension;
    }
    this.order = order;
    const sums = new ExactSums(order);
    for (const m of measurements)
      sums.measure(
        m,
        (state) => this.#first.get(state)!,
        (state) => this.#dimension.get(state)!,
      );
    const columns = sums.columns();
    const factor = new EnvelopeCholesky(columns);
    this.logDeterminant = factor.logDeterminant();
    this.#inverse = Array.from({ length: order }, (_, j) => factor.inverseColumn(j));
    this.#solution = Array.from({ length: order }, (_, i) =>
      sums.right.reduce((sum, value, j) => add(sum, multiply(this.#inverse[j]!.get(i), value)), zero),
    );
    let [normOfInverse, largest] = [0, 0];
    for (const column of this.#inverse) {
      normOfInverse = Math.max(
        normOfInverse,
        column.hi.reduce((sum, value) => sum + Math.abs(value), 0),
      );
      largest = Math.max(
        largest,
        column.hi.reduce((most, value) => Math.max(most, Math.abs(value)), 0),
      );
    }
    const norms = new Float64Array(order);
    for (let j = 0; j < order; j += 1)
      for (let p = columns.columnPointers[j]!; p < columns.columnPointers[j + 1]!; p += 1) {
        norms[j]! += Math.abs(columns.values[p]!);
        if (columns.rowIndices[p] !== j) norms[columns.rowIndices[p]!]! += Math.abs(columns.values[p]!);
      }
    this.norm = norms.reduce((most, value) => Math.max(most, value), 0);
    this.normOfInverse = normOfInverse;
    this.largest = largest;
    this.weightedSquares = this.#squares(measurements);
  }

  #squares(measurements: readonly MeasurementInput[]): number {
    let total = zero;
    for (const { states, jacobians, residual, ...noise } of measurements) {
      const m = residual.length;
      const v = Array.from({ length: m }, (_, q) => {
        let sum: DoubleDouble = [residual[q]!, 0];
        for (const [k, state] of states.entries())
          for (let u = 0; u < this.#dimension.get(state)!; u += 1)
            sum = subtract(
              sum,
              multiply([entry(jacobians[k]!, q, u, this.#dimension.get(state)!), 0], this.#solution[this.#first.get(state)! + u]!),
            );
        return sum;
      });
      const weight = exactWeights(noise, m);
      for (let q = 0; q < m; q += 1) for (let r = 0; r < m; r += 1) total = add(total, multiply(multiply(v[q]!, weight[q]![r]!), v[r]!));
    }
    return total[0];
  }

  /** ‖Λ‖₁ ‖Λ⁻¹‖₁. */
  get condition(): number {
    return this.norm * this.normOfInverse;
  }

  /** Σ[a, b], row-major. */
  block(a: number, b: number): Float64Array {
    const [da, db] = [this.#dimension.get(a)!, this.#dimension.get(b)!];
    return Float64Array.from(
      { length: da * db },
      (_, k) => this.#inverse[this.#first.get(b)! + (k % db)]!.hi[this.#first.get(a)! + Math.floor(k / db)]!,
    );
  }

  solution(state: number): Float64Array {
    return Float64Array.from({ length: this.#dimension.get(state)! }, (_, u) => this.#solution[this.#first.get(state)! + u]![0]);
  }
}
