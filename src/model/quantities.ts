/** What a number measures, so that a log knows its unit and a residual knows whether to wrap. `plain` numbers are never converted. */
export type Quantity = "length" | "angle" | "time" | "plain";

/** The angle in (−π, π] that differs from `angle` by whole turns. */
export function wrapAngle(angle: number): number {
  const wrapped = angle - 2 * Math.PI * Math.round(angle / (2 * Math.PI));
  return wrapped <= -Math.PI ? wrapped + 2 * Math.PI : wrapped;
}

/** The angle in [0, 2π) that differs from `angle` by whole turns: how circles are read. */
export function wrapTurn(angle: number): number {
  const wrapped = angle - 2 * Math.PI * Math.floor(angle / (2 * Math.PI));
  return wrapped < 0 || wrapped >= 2 * Math.PI ? 0 : wrapped; // both only by rounding next to a whole turn
}
