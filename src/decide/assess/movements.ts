// Which of many pairs of states differ really: one point at two epochs, again and again.
import { perTestLevel } from "../family-level.js";
import { displacementTest, type MovementVerdict } from "../movement.js";
import type { Network } from "./network.js";
import { deviationsOf, differenceOf } from "./precision.js";

export interface Movement {
  readonly first: string;
  readonly second: string;
  /** Second minus first; SI units and radians. */
  readonly displacement: Float64Array;
  readonly standardDeviations: Float64Array;
  readonly verdict: MovementVerdict;
}

/**
 * The displacement test of each pair (`displacementTest`), at a level that all of them together keep.
 * @param options `level` 0.05 unless given: the chance of any false alarm.
 * @throws as `differenceOf` and `displacementTest`.  Cost: the paths of the states to the root.
 */
export function movements(
  network: Network,
  pairs: readonly (readonly [string, string])[],
  { level = 0.05, power = 0.8 }: { level?: number; power?: number } = {},
): Movement[] {
  if (pairs.length === 0) return [];
  const each = perTestLevel(level, pairs.length);
  return pairs.map(([first, second]) => {
    const { dimension, difference, covariance } = differenceOf(network, first, second);
    const verdict = displacementTest({ displacement: difference, covariance }, { level: each, power, name: second });
    return { first, second, displacement: difference, standardDeviations: deviationsOf(covariance, dimension), verdict };
  });
}
