// A network from one end to the other: how well the readings fit, which to doubt, how sure every state is, and why.
import { stateKinds } from "../../model/states.js";
import { type VarianceFactorVerdict, varianceFactorTest } from "../variance-factor.js";
import type { Network } from "./network.js";
import { type Limits, type RelativePrecision, relativePrecision, type StatePrecision, statePrecisions } from "./precision.js";
import { putBack, type Screening, type ScreeningOptions, screenReadings } from "./screening.js";
import { type Weakness, weaknesses } from "./weakness.js";

export interface AssessmentOptions extends ScreeningOptions {
  /** Of regions and limits. Default 0.95. */
  readonly confidence?: number;
  readonly limits?: Limits;
  /** Pairs of states whose difference is asked for. */
  readonly between?: readonly (readonly [string, string])[];
  /** Whether values and deviations are those without the suspects. Default false: every reading counts. */
  readonly setAsideSuspects?: boolean;
}

/** Everything in SI units and radians. */
export interface Assessment {
  readonly confidence: number;
  readonly counts: { readonly states: number; readonly fixed: number; readonly unknowns: number; readonly readings: number };
  /** Of all readings, and of those that are not suspect; undefined when no reading is redundant. */
  readonly globalTest: VarianceFactorVerdict | undefined;
  readonly globalTestWithoutSuspects: VarianceFactorVerdict | undefined;
  readonly screening: Screening;
  readonly suspectsSetAside: boolean;
  /** Worst first; see `statePrecisions`. */
  readonly states: readonly StatePrecision[];
  /** Of the worst states of the first quantity. */
  readonly weakest: readonly Weakness[];
  readonly between: readonly RelativePrecision[];
  /** States and pairs that fail the limit. */
  readonly failing: number;
}

const explained = 3;

/**
 * Solves, tests, and says how sure everything is. Afterwards the adjustment is solved: with all its readings, or without the suspects.
 * @throws whatever `Adjustment.solve` throws; as `screenReadings`, `statePrecisions` and `relativePrecision`.
 */
export function assess(network: Network, options: AssessmentOptions = {}): Assessment {
  const { adjustment } = network;
  const { level = 0.05, confidence = 0.95, limits = {}, between = [], setAsideSuspects = false } = options;
  adjustment.solve();
  const globalTest = globalTestOf(network, level);
  const screening = screenReadings(network, options);
  const { suspects } = screening;
  const globalTestWithoutSuspects = suspects.length > 0 ? globalTestOf(network, level) : globalTest;
  if (!setAsideSuspects) putBack(network, suspects);
  const states = statePrecisions(network, { confidence, limits });
  const pairs = between.map((pair) => relativePrecision(network, pair, { confidence, limits }));
  const worst = states.filter(({ quantity }) => quantity === states[0]!.quantity).slice(0, explained);
  const failing = [...states, ...pairs].filter(({ tolerance }) => tolerance?.verdict === "fails the limit").length;
  let fixed = 0;
  for (const state of adjustment.states()) if (state.fixed) fixed += 1;
  return {
    confidence,
    counts: {
      states: states.length,
      fixed,
      unknowns: states.reduce((sum, { kind }) => sum + stateKinds[kind].dimension, 0),
      readings: adjustment.readingCount + (setAsideSuspects ? suspects.length : 0),
    },
    globalTest,
    globalTestWithoutSuspects,
    screening,
    suspectsSetAside: setAsideSuspects && suspects.length > 0,
    states,
    weakest: weaknesses(
      network,
      worst.map(({ name }) => name),
    ),
    between: pairs,
    failing,
  };
}

function globalTestOf({ estimate }: Network, level: number): VarianceFactorVerdict | undefined {
  const { weightedSquares, degreesOfFreedom } = estimate.varianceFactor();
  return degreesOfFreedom > 0 ? varianceFactorTest({ weightedSquares, redundancy: degreesOfFreedom }, { level }) : undefined;
}
