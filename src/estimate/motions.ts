// What a motion that no measurement sees looks like to a person: a common shift, a common turn, or something else.
import { type NoiseRoot, restoreColumns } from "./noise.js";
import { timesRows } from "./null-space.js";
import { norm, orthogonalize, orthonormalize } from "./orthogonal.js";
import type { WhitenedRows } from "./whitened.js";

/** One motion that the measurements leave open. */
export interface Motion {
  /** shift: all states by the same step; turn: together about a point; free: any other way. */
  readonly kind: "shift" | "turn" | "free";
  readonly states: readonly number[];
  /** shift: the step, a unit vector over the unknowns of the largest state; smaller states take its first numbers. */
  readonly direction?: readonly number[];
  /** free: how many motions of that kind. */
  readonly count?: number;
  readonly because: string;
}

/** Rows may tell their noise, so that Jacobians can be read in their own units. */
export type RowsWithNoise = WhitenedRows & { readonly noise?: NoiseRoot };

/** States that move together, and all rows that read any of them, those states' blocks alone. */
export interface Cluster {
  readonly states: readonly number[];
  readonly dimensions: readonly number[];
  readonly rows: readonly RowsWithNoise[];
  /** Unknowns of each state begin here. */
  readonly first: ReadonlyMap<number, number>;
  readonly order: number;
  /** Nothing ties these states to any other. */
  readonly isWhole: boolean;
}

/** Rows see a motion when they change by more than this share of what they would without cancellation. */
const SEEN = 1e-9;
/** How near a vector of the null space, found by iteration, comes to one of a plain form. Largest distance seen: 2e-5, headings of a chain
 *  of 10 000 poses. */
const NEAR = 1e-3;

/**
 * The motions of one cluster in plain terms. Shifts are tested on the rows themselves; turns by a common change of all headings, or for
 * points by the distances that they keep.
 * @param basis order × count, column-major: motions that the rows do not see, each unknown divided by its `scale`.
 */
export function motionsOf(cluster: Cluster, basis: Float64Array, count: number, scale: Float64Array): Motion[] {
  const { states, order } = cluster;
  const rest = new Space(basis.slice(), count, scale);
  const motions: Motion[] = [];
  for (const { direction, step } of shiftsOf(cluster)) {
    if (rest.remove(step)) motions.push({ kind: "shift", states, direction, because: becauseOf(cluster, "shift") });
  }
  const turn = turnOf(cluster, unscaled(basis, scale, order), count, rest, motions.length);
  if (turn && rest.remove(turn)) motions.push({ kind: "turn", states, because: becauseOf(cluster, "turn") });
  if (rest.dimension > 0) {
    const touched = states.filter((state, k) => rest.touches(cluster.first.get(state)!, cluster.dimensions[k]!));
    // Parts of weakly read states are small in scaled unknowns, so all are named where no plainer motion has named them.
    const named = motions.length > 0 ? touched : states;
    motions.push({ kind: "free", states: named, count: rest.dimension, because: becauseOf(cluster, "free") });
  }
  return motions;
}

const unscaled = (basis: Float64Array, scale: Float64Array, order: number): Float64Array =>
  basis.map((value, k) => value * scale[k % order]!);

function becauseOf({ states, isWhole, rows }: Cluster, kind: Motion["kind"]): string {
  const these = states.length === 1 ? "it" : "them";
  if (rows.length === 0) return `no measurement reads ${these}`;
  const tie = isWhole ? `no measurement ties ${these} to anything fixed` : `what ties ${these} to the other states`;
  if (kind === "shift") return isWhole ? tie : `${tie} leaves a common step open`;
  if (kind === "turn") return isWhole ? "no measurement fixes their direction" : `${tie} leaves their direction open`;
  return isWhole ? `there are fewer independent measurements than unknowns among ${these}` : `${tie} says too little`;
}

/** A space of motions, in scaled unknowns, that gets smaller as plain ones are found. */
class Space {
  /** Orthonormal. */
  #basis: Float64Array[];
  readonly #scale: Float64Array;

  /** @param columns may depend on one another. */
  constructor(basis: Float64Array, columns: number, scale: Float64Array) {
    const order = scale.length;
    const lengths = orthogonalize(basis, new Float64Array(0), columns);
    const largest = Math.max(...lengths);
    this.#scale = scale;
    this.#basis = Array.from(lengths, (length, k) => basis.subarray(k * order, (k + 1) * order).map((value) => value / length)).filter(
      (_, k) => lengths[k]! > NEAR * largest,
    );
  }

  get dimension(): number {
    return this.#basis.length;
  }

  /** Takes a motion (in unscaled unknowns) out of the space, that is the part of it that is left there; false when none is. */
  remove(motion: Float64Array): boolean {
    const vector = motion.map((value, i) => value / this.#scale[i]!);
    const along = new Float64Array(vector.length);
    for (const column of this.#basis) {
      let share = 0;
      for (let i = 0; i < column.length; i += 1) share += column[i]! * vector[i]!;
      for (let i = 0; i < column.length; i += 1) along[i]! += share * column[i]!;
    }
    if (!(norm(along) > NEAR * norm(vector))) return false;
    const order = vector.length;
    const next = new Float64Array(order * (this.dimension + 1));
    next.set(along);
    for (const [k, column] of this.#basis.entries()) next.set(column, (k + 1) * order);
    orthonormalize(next, this.dimension + 1, NEAR);
    this.#basis = Array.from(this.#basis, (_, k) => next.subarray((k + 1) * order, (k + 2) * order)).filter((column) => norm(column) > 0.5);
    return true;
  }

  /** The motion in unscaled unknowns, when there is but one. */
  only(): Float64Array {
    return this.#basis[0]!.map((value, i) => value * this.#scale[i]!);
  }

  touches(first: number, dimension: number): boolean {
    return this.#basis.some((column) => norm(column, first, dimension) > NEAR);
  }
}

/** Common shifts that no row sees: along axes where these are free, else along the directions that are. States of fewer unknowns than
 *  the others (an orientation among points) may stand still. */
function shiftsOf(cluster: Cluster): { direction: number[]; step: Float64Array }[] {
  const { states, dimensions, rows, first, order } = cluster;
  const largest = Math.max(...dimensions);
  for (let smallest = 1; smallest <= largest; smallest += 1) {
    if (!dimensions.includes(smallest)) continue;
    const steps = new Float64Array(order * largest);
    for (const [k, state] of states.entries()) {
      if (dimensions[k]! < smallest) continue;
      for (let u = 0; u < dimensions[k]!; u += 1) steps[u * order + first.get(state)! + u] = 1;
    }
    const changes = timesRows(rows, (state) => first.get(state)!, steps, order, largest);
    const uncancelled = sizeOf(rows);
    const m = changes.length / largest;
    const isFree = (b: Float64Array, k: number): boolean => norm(b, k * m, m) <= SEEN * uncancelled;
    const axes = [...steps.keys()].slice(0, largest).filter((u) => isFree(changes, u));
    const turned = Float64Array.from({ length: largest * largest }, (_, k) => (k % (largest + 1) === 0 ? 1 : 0));
    orthogonalize(changes, turned, largest);
    const free = [...turned.keys()].slice(0, largest).filter((k) => isFree(changes, k));
    if (free.length === 0) continue;
    const directions = axes.map((u) => Array.from({ length: largest }, (_, v): number => (v === u ? 1 : 0)));
    if (free.length > axes.length) directions.push(...offAxes(turned, free, axes, largest));
    return directions.map((direction) => {
      const step = new Float64Array(order);
      for (let u = 0; u < largest; u += 1) for (let i = 0; i < order; i += 1) step[i]! += direction[u]! * steps[u * order + i]!;
      return { direction, step };
    });
  }
  return [];
}

/** An orthonormal basis of the free directions at right angles to the free axes, the largest number of each positive. */
function offAxes(turned: Float64Array, free: readonly number[], axes: readonly number[], n: number): number[][] {
  const columns = axes.length + free.length;
  const all = new Float64Array(n * columns);
  for (const [k, u] of axes.entries()) all[k * n + u] = 1;
  for (const [k, column] of free.entries()) all.set(turned.subarray(column * n, (column + 1) * n), (axes.length + k) * n);
  // Free directions are told apart to SEEN, so what depends on the axes is no longer than that.
  for (let q = axes.length; q < columns; q += 1) for (const u of axes) all[q * n + u] = 0;
  const rest = all.slice(axes.length * n);
  const lengths = orthogonalize(rest, new Float64Array(0), free.length);
  return [...lengths.keys()]
    .filter((k) => lengths[k]! > 0.5)
    .map((k) => {
      const column = Array.from(rest.subarray(k * n, (k + 1) * n), (value) => value / lengths[k]!);
      const leading = column.reduce((best, value) => (Math.abs(value) > Math.abs(best) ? value : best), 0);
      return column.map((value) => (Math.abs(value) <= SEEN ? 0 : leading < 0 ? -value : value));
    });
}

/** Root of the sum of squares of all Jacobian entries. */
function sizeOf(rows: readonly WhitenedRows[]): number {
  let sum = 0;
  for (const { blocks } of rows) for (const block of blocks) sum += norm(block) ** 2;
  return Math.sqrt(sum);
}

/** A common turn, as a motion: all headings (the third unknown of planar poses) or orientations of stations among points change alike; or
 *  points of the plane, free to shift, that keep their distances and can still do one thing more. */
function turnOf(cluster: Cluster, basis: Float64Array, count: number, rest: Space, shifts: number): Float64Array | undefined {
  const { states, dimensions, first } = cluster;
  if (rest.dimension === 0 || Math.max(...dimensions) > 3) return undefined;
  const hasPoses = dimensions.includes(3);
  const angles: number[] = [];
  for (const [k, state] of states.entries()) {
    if (hasPoses ? dimensions[k] === 3 : dimensions[k] === 1) angles.push(first.get(state)! + dimensions[k]! - 1);
  }
  if (angles.length > 0) return dimensions.some((d) => d > 1) ? equalAt(cluster.order, basis, count, angles) : undefined;
  if (!(rest.dimension === 1 && shifts === 2 && dimensions.every((d) => d === 2))) return undefined;
  const motion = rest.only();
  return keepsDistances(cluster, motion) ? motion : undefined;
}

/** The motion of the space in which all `unknowns` change by one; undefined when there is none. */
function equalAt(order: number, basis: Float64Array, count: number, unknowns: readonly number[]): Float64Array | undefined {
  const n = unknowns.length;
  const there = Float64Array.from({ length: n * count }, (_, k) => basis[Math.floor(k / n) * order + unknowns[k % n]!]!);
  const turned = basis.slice();
  const lengths = orthogonalize(there, turned, count);
  const largest = Math.max(...lengths);
  const motion = new Float64Array(order);
  for (let k = 0; k < count; k += 1) {
    if (!(lengths[k]! > NEAR * largest)) continue;
    let sum = 0;
    for (let i = 0; i < n; i += 1) sum += there[k * n + i]!;
    for (let i = 0; i < order; i += 1) motion[i]! += (sum / lengths[k]! ** 2) * turned[k * order + i]!;
  }
  return unknowns.every((u) => Math.abs(motion[u]! - 1) <= NEAR) ? motion : undefined;
}

/** All rows between two of the points are distances: their derivatives are opposite unit vectors. What keeps all distances and is no
 *  shift, and is the only such motion, is the turn, which keeps them for every net. */
function keepsDistances({ rows, first, order }: Cluster, motion: Float64Array): boolean {
  let distances = 0;
  for (const { states, blocks, rows: m, noise } of rows) {
    if (states.length > 2) continue;
    if (states.length < 2 || !noise) return false;
    const [a, b] = blocks.map((block) => {
      const own = block.slice();
      restoreColumns(noise, m, own);
      return own;
    }) as [Float64Array, Float64Array];
    for (let q = 0; q < m; q += 1) {
      const isOpposite = Math.hypot(a[q]! + b[q]!, a[m + q]! + b[m + q]!) <= SEEN;
      if (!isOpposite || Math.abs(Math.hypot(a[q]!, a[m + q]!) - 1) > SEEN) return false;
    }
    const [i, j] = states.map((state) => first.get(state)!) as [number, number];
    if (Math.hypot(motion[i]! - motion[j]!, motion[i + 1]! - motion[j + 1]!) > NEAR * (norm(motion) / Math.sqrt(order))) distances += 1;
  }
  return distances > 0;
}
