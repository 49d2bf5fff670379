/** What an adjustment needs of an estimate: `Estimate` has it, and so may anything else that solves linear least squares. */
export interface EstimateLike {
  addState(dimension: number, options?: { name?: string }): number;
  addMeasurement(measurement: LinearMeasurement): number;
  withdraw(measurement: number): void;
  replace(measurement: number, by: Linearization): void;
  forget(states: readonly number[]): void;
  /** All or nothing; throws when the states are not determined. */
  commit(): unknown;
  /** The correction of a state to its linearization point. */
  solution(state: number): Float64Array;
  /** The covariance of that correction, row-major. */
  marginal(state: number): Float64Array;
}

export interface Linearization {
  readonly jacobians: readonly Float64Array[];
  readonly residual: Float64Array;
}

export interface LinearMeasurement extends Linearization {
  readonly states: readonly number[];
  readonly standardDeviations?: Float64Array;
  readonly covariance?: Float64Array;
  readonly information?: Float64Array;
  readonly name?: string;
}
