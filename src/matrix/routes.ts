// The two ways from measurement rows to a factor of their information matrix, and the numbers that choose between them.

/** `"information"`: Cholesky of JᵀWJ, whose condition is the square of the rows'. `"orthogonal"`: reflections of the rows themselves.
 *  `"automatic"`: the first, unless its condition costs too many digits. */
export type Route = "automatic" | "information" | "orthogonal";

export const routes: readonly Route[] = ["automatic", "information", "orthogonal"];

/** The estimate of condition × 2.2e-16, for JᵀWJ scaled to unit diagonal, from which the information matrix is not trusted with its factor. It bounds the
 *  relative error of the worst variance; on the bench's families that was 5 to 600 times smaller. */
export const LARGEST_LOSS = 1e-8;

/** Rows whose condition × 2.2e-16, with columns of norm 1, reaches this determine some unknown by rounding noise alone. Measured: 0.74 or more on
 *  nets, patrols, helices, chains and grids without their priors and on 2 000 random difference networks; at most 0.01 on networks that are
 *  determined, even with weights over 30 orders of magnitude. */
export const NO_DIGITS: number = 1 / 16;

/** Largest squared norm of a column, and the reciprocal of the smallest: see orthogonalBegin in assembly/factor/orthogonal.ts. */
export const LARGEST_SQUARE: number = 2 ** 900;

/** As reasons tell it. */
export const conditionText = (condition: number): string =>
  `JᵀWJ scaled to unit diagonal has a condition of about ${condition.toExponential(1)}`;
