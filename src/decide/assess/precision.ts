// How sure each state is: confidence region, limit, and two states together.
import type { Quantity } from "../../model/quantities.js";
import { type StateKindName, stateKinds } from "../../model/states.js";
import { confidenceScale, errorEllipse, errorEllipsoid } from "../ellipse.js";
import { ArgumentError } from "../errors.js";
import { type ToleranceVerdict, toleranceVerdict } from "../tolerance.js";
import type { Network } from "./network.js";

/** A semi-axis of a confidence region, longest first. */
export interface SemiAxis {
  readonly length: number;
  /** Radians from north towards east: in a plane in [0, π), in space in [0, 2π). */
  readonly bearing?: number;
  /** Radians above the horizon, in space. */
  readonly elevation?: number;
}

/** Largest semi-axes allowed, by what they measure: metres, radians, seconds, or the state's own unit. */
export type Limits = { readonly [quantity in Quantity]?: number };

/** One state and how sure it is. SI units and radians. */
export interface StatePrecision {
  readonly name: string;
  readonly kind: StateKindName;
  /** What the region is measured in. States of one quantity can be compared. */
  readonly quantity: Quantity;
  /** In the kind's stored form. */
  readonly value: Float64Array;
  /** In the kind's local coordinates. */
  readonly standardDeviations: Float64Array;
  /** Row-major, in local coordinates. */
  readonly covariance: Float64Array;
  /** Of the position of a point or pose, or of the number that the state is. */
  readonly semiAxes: readonly SemiAxis[];
  /** Against the limit for its quantity, when there is one. */
  readonly tolerance: ToleranceVerdict | undefined;
}

/** Two states' difference, second minus first: of positions, heights, or numbers of one quantity. */
export interface RelativePrecision {
  readonly first: string;
  readonly second: string;
  readonly quantity: Quantity;
  readonly difference: Float64Array;
  readonly standardDeviations: Float64Array;
  /** Row-major. */
  readonly covariance: Float64Array;
  readonly semiAxes: readonly SemiAxis[];
  /** Length of the difference and its standard deviation; the deviation of a length of 0 is that of the worst direction. */
  readonly length: number;
  readonly lengthDeviation: number;
  readonly tolerance: ToleranceVerdict | undefined;
}

/** How many of a state's first local coordinates a region is drawn for: its position, or all of it. */
export function regionDimension(kind: StateKindName): 1 | 2 | 3 {
  if (kind === "point-2d" || kind === "planar-pose") return 2;
  return kind === "point-3d" || kind === "spatial-pose" ? 3 : 1;
}

/** The leading `to` × `to` block of a `from` × `from` matrix, row-major. */
export function leadingBlock(matrix: Float64Array, from: number, to: number): Float64Array {
  return Float64Array.from({ length: to * to }, (_, at) => matrix[Math.floor(at / to) * from + (at % to)]!);
}

function semiAxesOf(covariance: Float64Array, dimension: 1 | 2 | 3, confidence: number): SemiAxis[] {
  if (dimension === 1) return [{ length: confidenceScale(1, confidence) * Math.sqrt(covariance[0]!) }];
  if (dimension === 3)
    return errorEllipsoid(covariance, { confidence }).axes.map(({ length, bearing, elevation }) => ({ length, bearing, elevation }));
  const { semiMajor, semiMinor, bearing } = errorEllipse(covariance, { confidence });
  return [
    { length: semiMajor, bearing },
    { length: semiMinor, bearing: bearing >= Math.PI / 2 ? bearing - Math.PI / 2 : bearing + Math.PI / 2 },
  ];
}

export const deviationsOf = (covariance: Float64Array, dimension: number): Float64Array =>
  Float64Array.from({ length: dimension }, (_, k) => Math.sqrt(covariance[k * (dimension + 1)]!));

const quantities: readonly Quantity[] = ["length", "angle", "time", "plain"];

/**
 * Every estimated state, worst first: those measured in lengths by their largest semi-axis, then angles, times and plain numbers.
 * @throws {LevelError}  @throws {ArgumentError} a limit is not positive, or no state is measured in its quantity.
 * Cost: a path a state, or none when the estimate keeps its marginals.
 */
export function statePrecisions(
  { adjustment }: Network,
  { confidence = 0.95, limits = {} }: { confidence?: number; limits?: Limits } = {},
): StatePrecision[] {
  const states: StatePrecision[] = [];
  for (const { name, kind: kindName, fixed, value, id } of adjustment.states()) {
    if (fixed || id === undefined || value === undefined) continue;
    const kind = stateKinds[kindName];
    const dimension = regionDimension(kind.name);
    const covariance = adjustment.covariance(name);
    const region = leadingBlock(covariance, kind.dimension, dimension);
    const quantity = kind.localQuantities[0]!;
    const limit = limits[quantity];
    states.push({
      name,
      kind: kind.name,
      quantity,
      value,
      standardDeviations: deviationsOf(covariance, kind.dimension),
      covariance,
      semiAxes: semiAxesOf(region, dimension, confidence),
      tolerance: limit === undefined ? undefined : toleranceVerdict({ covariance: region, dimension, limit }, { confidence, name }),
    });
  }
  for (const quantity of quantities)
    if (limits[quantity] !== undefined && !states.some((state) => state.quantity === quantity))
      throw new ArgumentError(
        "limits",
        `${limits[quantity]} (${quantity})`,
        `no estimated state is measured in ${quantity === "plain" ? "a unit of its own" : `${quantity}s`}, so nothing can be held against it.`,
      );
  return states.sort(
    (a, b) => quantities.indexOf(a.quantity) - quantities.indexOf(b.quantity) || b.semiAxes[0]!.length - a.semiAxes[0]!.length,
  );
}

/**
 * The difference of two states of any kinds that have a position (in plan when one has no height), a height or a number in common.
 * @throws {ArgumentError} the states are one, both fixed, or have nothing in common.  @throws {SigmatideError} `UNKNOWN_STATE`
 * Cost: both paths to the root.
 */
export function relativePrecision(
  network: Network,
  [first, second]: readonly [string, string],
  { confidence = 0.95, limits = {} }: { confidence?: number; limits?: Limits } = {},
): RelativePrecision {
  const { dimension, quantity, difference, covariance } = differenceOf(network, first, second);
  const semiAxes = semiAxesOf(covariance, dimension, confidence);
  const length = Math.hypot(...difference);
  let along = 0;
  for (let i = 0; i < dimension; ++i)
    for (let j = 0; j < dimension; ++j) along += difference[i]! * covariance[i * dimension + j]! * difference[j]!;
  const limit = limits[quantity];
  return {
    first,
    second,
    quantity,
    difference,
    standardDeviations: deviationsOf(covariance, dimension),
    covariance,
    semiAxes,
    length,
    lengthDeviation: length > 0 ? Math.sqrt(along) / length : semiAxes[0]!.length / confidenceScale(dimension, confidence),
    tolerance:
      limit === undefined
        ? undefined
        : toleranceVerdict({ covariance, dimension, limit }, { confidence, name: `${second} minus ${first}` }),
  };
}

/** Second minus first, in the local coordinates that both have, and its covariance. */
export function differenceOf(
  { adjustment, estimate }: Network,
  first: string,
  second: string,
): { dimension: 1 | 2 | 3; quantity: Quantity; difference: Float64Array; covariance: Float64Array } {
  const [from, to] = [adjustment.state(first), adjustment.state(second)];
  if (first === second) throw new ArgumentError("pair", `${first}, ${second}`, "name two different states.");
  if (from.fixed && to.fixed)
    throw new ArgumentError(
      "pair",
      `${first}, ${second}`,
      "both are fixed, so nothing about them is uncertain: name one that is estimated.",
    );
  const [a, b] = [stateKinds[from.kind], stateKinds[to.kind]];
  const quantity = a.localQuantities[0]!;
  const dimension = Math.min(regionDimension(a.name), regionDimension(b.name)) as 1 | 2 | 3;
  if (dimension === 1 && a !== b)
    throw new ArgumentError(
      "pair",
      `${first} (${a.name}), ${second} (${b.name})`,
      "they have no coordinates in common: name two positions, or two states of one kind.",
    );
  const [origin, target] = [adjustment.value(first), adjustment.value(second)];
  const step = a === b ? a.local(origin, target) : target.map((number, k) => number - origin[k]!);
  const selector = (unknowns: number, sign: number) =>
    Float64Array.from({ length: dimension * unknowns }, (_, at) => (Math.floor(at / unknowns) === at % unknowns ? sign : 0));
  const covariance = from.fixed
    ? leadingBlock(adjustment.covariance(second), b.dimension, dimension)
    : to.fixed
      ? leadingBlock(adjustment.covariance(first), a.dimension, dimension)
      : estimate.relativeCovariance(from.id!, to.id!, selector(a.dimension, -1), selector(b.dimension, 1));
  return { dimension, quantity, difference: step.slice(0, dimension), covariance };
}
