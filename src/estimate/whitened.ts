/** Rows of a measurement with unit noise: all multiplied by R^(−1/2). */
export interface WhitenedRows {
  /** Distinct states that the rows read. */
  readonly states: readonly number[];
  /** Number of rows, m. */
  readonly rows: number;
  /** One block a state, m × its dimension, column-major: the m entries of one unknown side by side. */
  readonly blocks: readonly Float64Array[];
  /** Measured minus predicted at the linearization point, length m. */
  readonly residual: Float64Array;
}
