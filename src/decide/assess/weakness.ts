// Why a state is as unsure as it is: what its own readings give, and what comes in through its neighbours.
import { type StateKindName, stateKinds } from "../../model/states.js";
import { symmetricEigen } from "../symmetric-eigen.js";
import { type GivenReading, type Network, noiseCovariance, product, solveSymmetric } from "./network.js";
import { leadingBlock, regionDimension } from "./precision.js";

export interface Weakness {
  readonly name: string;
  readonly kind: StateKindName;
  /** Standard deviation in the state's worst direction. */
  readonly deviation: number;
  /** Unit vector of that direction, in the coordinates of the position, or [1]. */
  readonly direction: Float64Array;
  readonly readings: number;
  /** The same standard deviation if all its neighbours were known exactly; undefined when its readings alone do not determine it (what
   *  forgotten states left behind helps). */
  readonly deviationAlone: number | undefined;
  /** What single readings, its own or far ones, contribute to that deviation squared, the largest first. The shares of all readings add up
   *  to 1, less what forgotten states left behind. */
  readonly determinedBy: readonly { readonly reading: GivenReading; readonly share: number }[];
}

const shown = 5;

/** A state under study: its worst direction, what its readings say of it, and how every reading contributes. */
interface Study {
  readonly name: string;
  readonly id: number;
  readonly dimension: number;
  readonly deviation: number;
  readonly direction: Float64Array;
  /** Λ = Σ Jᵀ R⁻¹ J over its own readings. */
  readonly information: Float64Array;
  /** c = Σ u: the column of the whole covariance along the direction, state by state. */
  readonly column: (state: number) => Float64Array;
  readings: number;
  readonly shares: { reading: GivenReading; share: number }[];
}

/**
 * The estimate along u is a sum over independent readings (Gauss, Markov); reading i brings (Jᵢ c)ᵀ Rᵢ⁻¹ (Jᵢ c) of the variance uᵀ c, c = Σ u.
 * With the neighbours held the variance is uᵀ Λ⁻¹ u.
 * Cost: a column of the inverse for each state, and one pass over the readings for all of them together.
 */
export function weaknesses(network: Network, names: readonly string[]): Weakness[] {
  const { adjustment, estimate } = network;
  const first = new Map<number, { at: number; dimension: number }>();
  let order = 0;
  const estimated = [...adjustment.states()].filter(({ id }) => id !== undefined).sort((a, b) => a.id! - b.id!);
  for (const { id, kind } of estimated) {
    const { dimension } = stateKinds[kind];
    first.set(id!, { at: order, dimension });
    order += dimension;
  }
  const studies = names.map((name): Study => {
    const { kind, id } = adjustment.state(name);
    const n = stateKinds[kind].dimension;
    const d = regionDimension(kind);
    const { values, vectors } = symmetricEigen(leadingBlock(adjustment.covariance(name), n, d), d);
    const block = estimate.blockColumn(id!);
    const along = new Float64Array(order);
    for (let j = 0; j < d; ++j) for (let i = 0; i < order; ++i) along[i]! += vectors[0]![j]! * block[j * order + i]!;
    const column = (state: number) => {
      const { at, dimension } = first.get(state)!;
      return along.subarray(at, at + dimension);
    };
    const information = new Float64Array(n * n);
    return {
      name,
      id: id!,
      dimension: n,
      deviation: Math.sqrt(values[0]!),
      direction: vectors[0]!,
      information,
      column,
      readings: 0,
      shares: [],
    };
  });
  for (const { reading } of adjustment.readings()) contribute(network, reading, studies);
  return studies.map(({ name, dimension, deviation, direction, information, readings, shares }) => {
    const u = new Float64Array(dimension);
    u.set(direction);
    const alone = solveOrNothing(information, dimension, u)?.reduce((sum, number, k) => sum + number * u[k]!, 0);
    return {
      name,
      kind: adjustment.state(name).kind,
      deviation,
      direction,
      readings,
      deviationAlone: alone === undefined ? undefined : Math.sqrt(alone),
      determinedBy: shares.sort((a, b) => b.share - a.share).slice(0, shown),
    };
  });
}

/** Shares below this are not kept: nobody asks for the smallest of a hundred thousand. */
const leastShare = 1e-4;

function contribute({ adjustment }: Network, reading: GivenReading, studies: readonly Study[]): void {
  const { states, jacobians, residual } = adjustment.linearize(reading);
  const m = residual.length;
  const noise = noiseCovariance(reading);
  for (const study of studies) {
    const seen = new Float64Array(m); // J c
    for (const [k, state] of states.entries()) {
      const column = study.column(state);
      const part = product(jacobians[k]!, column, m, column.length, 1);
      for (let i = 0; i < m; ++i) seen[i]! += part[i]!;
    }
    const weighted = solveSymmetric("noise", noise, m, seen);
    const share = seen.reduce((sum, number, i) => sum + number * weighted[i]!, 0) / study.deviation ** 2;
    if (share >= leastShare) study.shares.push({ reading, share });
    const own = states.indexOf(study.id);
    if (own >= 0) inform(study, jacobians[own]!, noise, m);
  }
}

/** Λ += Jᵀ R⁻¹ J */
function inform(study: Study, jacobian: Float64Array, noise: Float64Array, m: number): void {
  const { dimension: n, information } = study;
  const weighted = solveSymmetric("noise", noise, m, jacobian, n);
  for (let i = 0; i < n; ++i)
    for (let j = 0; j < n; ++j) for (let k = 0; k < m; ++k) information[i * n + j]! += jacobian[k * n + i]! * weighted[k * n + j]!;
  study.readings += 1;
}

function solveOrNothing(matrix: Float64Array, order: number, b: Float64Array): Float64Array | undefined {
  try {
    return solveSymmetric("information", matrix, order, b);
  } catch {
    return undefined;
  }
}
