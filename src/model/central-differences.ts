// Numerical Jacobians by central differences with one step of Richardson's extrapolation (Richardson 1911): with D(h) = (f(x + h) − f(x − h)) / 2h
// the value (4 D(h/2) − D(h)) / 3 has error O(h⁴), and |D(h/2) − D(h)| / 3 bounds what the extrapolation removed.
import type { StateAt } from "./states.js";

/** A derivative and, entry by entry, what it may be off by. */
export interface NumericalJacobian {
  /** Row-major rows × dimension. */
  readonly values: Float64Array;
  readonly uncertainty: Float64Array;
}

/**
 * Step relative to a coordinate's natural scale. The error of the extrapolated value is about h⁴ + ε/h in relative terms: least near
 * ε^(1/5) = 7.4e-4.
 */
const relativeStep = 2 ** -10;

/** Rounding may take this share of the steepest slope; a plain number so near zero that it takes more is given a wider step. */
const roundingShare = 1e-5;

/** Where a coordinate's step starts: at its own size for a plain number or a time, else at one metre or one radian, where it also ends. */
function startingScale(state: StateAt, coordinate: number): number {
  const quantity = state.kind.localQuantities[coordinate];
  const size = Math.abs(state.value[coordinate]!);
  return (quantity === "plain" || quantity === "time") && size > 1e-30 ? size : 1;
}

/**
 * The derivative of `f` with respect to the local coordinates of one state. `difference(a, b)` is b − a, wrapped where it must be.
 * Calls `f` four times a coordinate, more often next to zero.
 */
export function centralDifferences(
  state: StateAt,
  f: (value: Float64Array) => Float64Array,
  difference: (from: Float64Array, to: Float64Array) => Float64Array = (from, to) => to.map((number, k) => number - from[k]!),
): NumericalJacobian {
  const { kind, value } = state;
  const columns: { slope: Float64Array; uncertainty: Float64Array }[] = [];
  for (let j = 0; j < kind.dimension; j++) {
    const at = (step: number) =>
      f(
        kind.retract(
          value,
          Float64Array.from({ length: kind.dimension }, (_, k) => (k === j ? step : 0)),
        ),
      );
    for (let scale = startingScale(state, j); ; scale = Math.min(1, scale * 1000)) {
      const step = relativeStep * scale;
      const wide = difference(at(-step), at(step)).map((change) => change / (2 * step));
      const ahead = at(step / 2);
      const narrow = difference(at(-step / 2), ahead).map((change) => change / step);
      const rounding = ahead.map((number) => (4 * Number.EPSILON * Math.abs(number)) / step);
      if (scale < 1 && Math.max(...rounding) > roundingShare * Math.max(...narrow.map(Math.abs))) continue;
      columns.push({
        slope: narrow.map((slope, i) => slope + (slope - wide[i]!) / 3),
        uncertainty: narrow.map((slope, i) => Math.abs(slope - wide[i]!) / 3 + rounding[i]!),
      });
      break;
    }
  }
  const rows = columns[0]!.slope.length;
  const interleave = (part: "slope" | "uncertainty") =>
    Float64Array.from({ length: rows * kind.dimension }, (_, k) => columns[k % kind.dimension]![part][Math.floor(k / kind.dimension)]!);
  return { values: interleave("slope"), uncertainty: interleave("uncertainty") };
}
