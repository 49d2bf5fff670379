// Why a state is as unsure as it is: what its own readings give, and what comes in through its neighbours.
import { stateKinds } from "../../model/states.js";
import { symmetricEigen } from "../symmetric-eigen.js";
import { type GivenReading, type Network, noiseCovariance, product, solveSymmetric } from "./network.js";
import { leadingBlock, regionDimension } from "./precision.js";

export interface Weakness {
  readonly name: string;
  /** Standard deviation in the state's worst direction. */
  readonly deviation: number;
  /** Unit vector of that direction, in the coordinates of the position, or [1]. */
  readonly direction: Float64Array;
  readonly readings: number;
  /** The same standard deviation if all its neighbours were known exactly; undefined when its readings alone do not determine it (what
   *  forgotten states left behind helps). */
  readonly deviationAlone: number | undefined;
  /** What its readings contribute to that deviation squared, the largest first; the shares of all of them add up to 1. */
  readonly determinedBy: readonly { readonly reading: GivenReading; readonly share: number }[];
}

const shown = 5;

/**
 * With the neighbours held, the best estimate along u is Σ gᵢᵀ lᵢ, gᵢ = Rᵢ⁻¹ Jᵢ y, Λ y = u, Λ = Σ Jᵢᵀ Rᵢ⁻¹ Jᵢ, of variance uᵀ y; reading i brings
 * gᵢᵀ Rᵢ gᵢ of it (Gauss, Markov).  Cost: one pass over the readings, for all the states together.
 */
export function weaknesses({ adjustment }: Network, names: readonly string[]): Weakness[] {
  const readingsOf = new Map<string, GivenReading[]>(names.map((name) => [name, []]));
  for (const { reading } of adjustment.readings()) for (const state of reading.states) readingsOf.get(state)?.push(reading);
  return names.map((name) => {
    const { kind: kindName, id } = adjustment.state(name);
    const n = stateKinds[kindName].dimension;
    const d = regionDimension(kindName);
    const { values, vectors } = symmetricEigen(leadingBlock(adjustment.covariance(name), n, d), d);
    const direction = vectors[0]!;
    const u = new Float64Array(n);
    u.set(direction);

    const information = new Float64Array(n * n);
    const parts = readingsOf.get(name)!.map((reading) => {
      const { states, jacobians, residual } = adjustment.linearize(reading);
      const m = residual.length;
      const jacobian = jacobians[states.indexOf(id!)]!;
      const weighted = solveSymmetric("noise", noiseCovariance(reading), m, jacobian, n); // R⁻¹ J
      for (let i = 0; i < n; ++i)
        for (let j = 0; j < n; ++j) for (let k = 0; k < m; ++k) information[i * n + j]! += jacobian[k * n + i]! * weighted[k * n + j]!;
      return { reading, jacobian, weighted, m };
    });
    const y = solveOrNothing(information, n, u);
    const variance = y?.reduce((sum, number, k) => sum + number * u[k]!, 0);
    const determinedBy = parts
      .map(({ reading, jacobian, weighted, m }) => {
        if (!y || !variance) return { reading, share: 0 };
        const [predicted, weight] = [product(jacobian, y, m, n, 1), product(weighted, y, m, n, 1)];
        return { reading, share: predicted.reduce((sum, number, k) => sum + number * weight[k]!, 0) / variance };
      })
      .sort((a, b) => b.share - a.share)
      .slice(0, shown);
    return {
      name,
      deviation: Math.sqrt(values[0]!),
      direction,
      readings: parts.length,
      deviationAlone: variance === undefined ? undefined : Math.sqrt(variance),
      determinedBy: y ? determinedBy : [],
    };
  });
}

function solveOrNothing(matrix: Float64Array, order: number, b: Float64Array): Float64Array | undefined {
  try {
    return solveSymmetric("information", matrix, order, b);
  } catch {
    return undefined;
  }
}
