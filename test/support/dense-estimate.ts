// A dense least-squares estimate, solved anew at each commit by QR of the whitened rows (ml-matrix): what adjustments are tested on.
import { CholeskyDecomposition, inverse, Matrix, QrDecomposition, SingularValueDecomposition } from "ml-matrix";
import { SigmatideError } from "../../src/errors.js";
import type { EstimateLike, Linearization, LinearMeasurement } from "../../src/model/adjustment/estimate-like.js";

interface Rows {
  states: readonly number[];
  blocks: Matrix[];
  residual: Matrix;
}

const square = (numbers: Float64Array): Matrix => Matrix.from1DArray(Math.sqrt(numbers.length), Math.sqrt(numbers.length), numbers);

/** W with Wᵀ W = R⁻¹. */
function whitening({ standardDeviations, covariance, information }: LinearMeasurement): Matrix {
  if (standardDeviations) return Matrix.diag(Array.from(standardDeviations, (deviation) => 1 / deviation));
  if (covariance) return inverse(new CholeskyDecomposition(square(covariance)).lowerTriangularMatrix);
  return new CholeskyDecomposition(square(information!)).lowerTriangularMatrix.transpose();
}

function whiten(w: Matrix, states: readonly number[], { jacobians, residual }: Linearization): Rows {
  const rows = residual.length;
  return {
    states,
    blocks: jacobians.map((jacobian) => w.mmul(Matrix.from1DArray(rows, jacobian.length / rows, jacobian))),
    residual: w.mmul(Matrix.columnVector(residual)),
  };
}

export class DenseEstimate implements EstimateLike {
  /** What has been asked of it, for tests that count. */
  commits = 0;
  replaced: number[] = [];
  readonly #dimensions: number[] = [];
  readonly #names: string[] = [];
  readonly #forgotten = new Set<number>();
  readonly #measurements = new Map<number, { whitening: Matrix; rows: Rows }>();
  #condensed: Rows[] = [];
  #next = 0;
  #place: number[] = [];
  #solution = new Matrix(0, 0);
  #covariance = new Matrix(0, 0);

  get measurements(): number {
    return this.#measurements.size;
  }
  addState(dimension: number, options: { name?: string } = {}): number {
    this.#names.push(options.name ?? "");
    return this.#dimensions.push(dimension) - 1;
  }
  addMeasurement(measurement: LinearMeasurement): number {
    const w = whitening(measurement);
    this.#measurements.set(this.#next, { whitening: w, rows: whiten(w, measurement.states, measurement) });
    return this.#next++;
  }
  withdraw(measurement: number): void {
    if (!this.#measurements.delete(measurement)) throw new Error(`no measurement ${measurement}`);
  }
  replace(measurement: number, by: Linearization): void {
    const record = this.#measurements.get(measurement)!;
    this.replaced.push(measurement);
    record.rows = whiten(record.whitening, record.rows.states, by);
  }
  forget(states: readonly number[]): void {
    const all = [...this.#measurements].map(([id, { rows }]) => ({ id, rows }));
    const touching = all.filter(({ rows }) => rows.states.some((state) => states.includes(state)));
    for (const { id } of touching) this.#measurements.delete(id);
    const rows = [
      ...touching.map((one) => one.rows),
      ...this.#condensed.filter((one) => one.states.some((state) => states.includes(state))),
    ];
    this.#condensed = this.#condensed.filter((one) => !rows.includes(one));
    const neighbours = [...new Set(rows.flatMap((one) => one.states))].filter((state) => !states.includes(state));
    // Eliminating the forgotten states first leaves the neighbours' information in the lower rows of R.
    const { r, y, place } = this.#triangle(rows, [...states, ...neighbours]);
    const from = place[neighbours[0]!] ?? r.rows;
    if (from < r.rows)
      this.#condensed.push({
        states: neighbours,
        blocks: neighbours.map((state) => r.subMatrix(from, r.rows - 1, place[state]!, place[state]! + this.#dimensions[state]! - 1)),
        residual: y.subMatrix(from, r.rows - 1, 0, 0),
      });
    for (const state of states) this.#forgotten.add(state);
  }
  commit(): void {
    this.commits++;
    const states = this.#dimensions.map((_, state) => state).filter((state) => !this.#forgotten.has(state));
    const { r, y, place } = this.#triangle([...[...this.#measurements.values()].map(({ rows }) => rows), ...this.#condensed], states);
    const { diagonal, rightSingularVectors } = new SingularValueDecomposition(scaleColumns(r));
    const least = diagonal.at(-1) ?? 0;
    if (!(least > 1e-12 * diagonal[0]!)) {
      const motion = rightSingularVectors.getColumn(rightSingularVectors.columns - 1);
      const moving = states.filter((state) =>
        motion.slice(place[state], place[state]! + this.#dimensions[state]!).some((number) => Math.abs(number) > 1e-6),
      );
      const names = moving.map((state) => this.#names[state]!);
      throw new SigmatideError("UNDETERMINED", `The readings do not determine ${names.join(", ")}.`, { states: moving, names });
    }
    const back = inverse(r);
    this.#place = place;
    this.#solution = back.mmul(y);
    this.#covariance = back.mmul(back.transpose());
  }
  solution(state: number): Float64Array {
    return Float64Array.from({ length: this.#dimensions[state]! }, (_, k) => this.#solution.get(this.#place[state]! + k, 0));
  }
  marginal(state: number): Float64Array {
    return this.cross(state, state);
  }
  cross(a: number, b: number): Float64Array {
    const n = this.#dimensions[b]!;
    return Float64Array.from({ length: this.#dimensions[a]! * n }, (_, k) =>
      this.#covariance.get(this.#place[a]! + Math.floor(k / n), this.#place[b]! + (k % n)),
    );
  }
  /** R and Qᵀ r of all rows, columns in the order of `states`. */
  #triangle(all: readonly Rows[], states: readonly number[]): { r: Matrix; y: Matrix; place: number[] } {
    const place: number[] = [];
    let columns = 0;
    for (const state of states) {
      place[state] = columns;
      columns += this.#dimensions[state]!;
    }
    const rows = all.reduce((sum, { residual }) => sum + residual.rows, 0);
    const a = Matrix.zeros(Math.max(rows, columns), columns);
    const b = Matrix.zeros(Math.max(rows, columns), 1);
    let top = 0;
    for (const { states: on, blocks, residual } of all) {
      for (const [k, state] of on.entries()) a.setSubMatrix(blocks[k]!, top, place[state]!);
      b.setSubMatrix(residual, top, 0);
      top += residual.rows;
    }
    const qr = new QrDecomposition(a);
    const y = qr.orthogonalMatrix.transpose().mmul(b);
    return { r: qr.upperTriangularMatrix, y: y.subMatrix(0, Math.max(0, columns - 1), 0, 0), place };
  }
}

function scaleColumns(a: Matrix): Matrix {
  const scaled = a.clone();
  for (let j = 0; j < a.columns; j++) scaled.mulColumn(j, 1 / (Math.hypot(...a.getColumn(j)) || 1));
  return scaled;
}
