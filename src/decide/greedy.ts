// Choosing what to measure: the best next candidate for its cost, again and again, with gains re-evaluated only where they can matter.
// Sources: G. L. Nemhauser, L. A. Wolsey, M. L. Fisher, Math. Program. 14 (1978) 265 (1 − 1/e); M. Minoux (1978) (lazy evaluation);
// J. Leskovec et al., KDD 2007 (unequal costs: the better of two greedy runs; the bound on what any choice could reach).
import { ArgumentError } from "./errors.js";
import { requirePositive } from "./require.js";
import { inWords, percent } from "./verdict.js";

/** One run of choosing. Gains are of a candidate given what was picked before in this run. */
export interface GainOracle {
  gain(candidate: number): number;
  /** Makes the candidate part of what is known. */
  pick(candidate: number): void;
}

export interface GreedyStep {
  readonly candidate: number;
  readonly gain: number;
  readonly cost: number;
  readonly totalGain: number;
  readonly totalCost: number;
}

export interface GreedyChoice {
  /** In the order of choosing: gain against cost is the curve to stop on. */
  readonly steps: readonly GreedyStep[];
  readonly totalGain: number;
  readonly totalCost: number;
  /** No choice within the budget gains more than this; Infinity when gains need not diminish. */
  readonly upperBound: number;
  /** Gains asked for. */
  readonly evaluations: number;
  readonly because: string;
}

export interface GreedyOptions {
  /** Largest sum of costs; no limit unless given. */
  readonly budget?: number;
  /** Largest number of picks; all unless given. */
  readonly picks?: number;
  /** Do gains only fall as others are picked (information gain does; the worst ellipse does not)? True unless given: evaluated lazily, with the
   *  guarantee. False: every gain anew at every step, no guarantee. */
  readonly diminishing?: boolean;
}

/**
 * Greedy selection under a budget. Equal costs: at least 1 − 1/e = 63 % of the best gain when gains are diminishing and never negative. Unequal
 * costs: the better of choosing by gain and by gain for cost, at least (1 − 1/e) / 2 of the best within a budget; a number of picks besides it
 * can cost more than that, and `upperBound` says how much at most.
 * @param costs of candidates 0, 1, …, positive.  @param start a fresh oracle; called once, or twice when costs differ and a limit binds.
 * @throws {ArgumentError} no candidate, a cost not positive, no candidate within the budget, a gain that is not a number.
 * Cost: gains a step: all at first, then few (lazy), plus all once at the end for the bound.
 */
export function selectGreedily(
  costs: ArrayLike<number>,
  start: () => GainOracle,
  { budget = Infinity, picks = costs.length, diminishing = true }: GreedyOptions = {},
): GreedyChoice {
  if (costs.length === 0) throw new ArgumentError("candidates", "none", "give at least one candidate to choose from.");
  for (let c = 0; c < costs.length; ++c) requirePositive(`costs[${c}]`, costs[c]!);
  if (!(budget > 0)) throw new ArgumentError("budget", budget, "give a positive budget.");
  if (!(Number.isInteger(picks) && picks > 0)) throw new ArgumentError("picks", picks, "give a whole number from 1.");
  const cheapest = Array.from(costs).reduce((least, cost) => Math.min(least, cost), Infinity);
  if (cheapest > budget) throw new ArgumentError("budget", budget, `the cheapest candidate costs ${cheapest}: raise the budget.`);
  const equal = Array.from(costs).every((cost) => cost === costs[0]);
  const problem = { costs, budget, picks, diminishing };
  const byRatio = run(problem, start(), (gain, cost) => gain / cost);
  const byGain = equal || (budget === Infinity && picks >= costs.length) ? byRatio : run(problem, start(), (gain) => gain);
  const better = byGain.totalGain > byRatio.totalGain ? byGain : byRatio;
  const upperBound = Math.min(byGain.upperBound, byRatio.upperBound);
  const evaluations = byRatio.evaluations + (byGain === byRatio ? 0 : byGain.evaluations);
  const { steps, totalGain, totalCost } = better;
  const bound =
    upperBound === Infinity
      ? "how much more another choice could gain is not known"
      : `at least ${percent(totalGain / upperBound)} of what any choice could gain`;
  return {
    steps,
    totalGain,
    totalCost,
    upperBound,
    evaluations,
    because:
      steps.length === 0
        ? "No candidate within the budget gains anything."
        : `${steps.length} of ${costs.length} candidates gain ${inWords(totalGain)} for ${inWords(totalCost)}, the last of them ${inWords(steps.at(-1)!.gain)}; ${bound}.`,
  };
}

interface Problem {
  readonly costs: ArrayLike<number>;
  readonly budget: number;
  readonly picks: number;
  readonly diminishing: boolean;
}

function run(
  { costs, budget, picks, diminishing }: Problem,
  oracle: GainOracle,
  worth: (gain: number, cost: number) => number,
): Omit<GreedyChoice, "because"> {
  let evaluations = 0;
  const gainOf = (candidate: number): number => {
    const gain = oracle.gain(candidate);
    evaluations += 1;
    if (Number.isNaN(gain))
      throw new ArgumentError(
        `gain of candidate ${candidate}`,
        gain,
        "give numbers: the gain function divides by zero or reads past its data.",
      );
    return gain;
  };
  // What is left, with its last known gain and the step at which that was evaluated.
  const left = Array.from(costs, (cost, candidate) => ({ candidate, cost, gain: gainOf(candidate), step: 0 }));
  const steps: GreedyStep[] = [];
  let totalGain = 0;
  let totalCost = 0;
  const bounds = diminishing ? [fractionalBound(left, budget, picks)] : [];
  while (steps.length < picks) {
    const affordable = left.filter(({ cost }) => totalCost + cost <= budget);
    if (!diminishing && steps.length > 0)
      for (const one of affordable) Object.assign(one, { gain: gainOf(one.candidate), step: steps.length });
    // An old gain is an upper bound of the new one: the first that stays on top after its own re-evaluation is the best of all.
    let best = largest(affordable, worth);
    while (best && best.step < steps.length && diminishing) {
      best.gain = gainOf(best.candidate);
      best.step = steps.length;
      best = largest(affordable, worth);
    }
    if (!best || best.gain <= 0) break;
    oracle.pick(best.candidate);
    left.splice(left.indexOf(best), 1);
    totalGain += best.gain;
    totalCost += best.cost;
    steps.push({ candidate: best.candidate, gain: best.gain, cost: best.cost, totalGain, totalCost });
  }
  if (diminishing) {
    for (const one of left) one.gain = gainOf(one.candidate);
    bounds.push(totalGain + fractionalBound(left, budget, picks));
  }
  return { steps, totalGain, totalCost, upperBound: Math.min(Infinity, ...bounds), evaluations };
}

interface Remaining {
  readonly candidate: number;
  readonly cost: number;
  gain: number;
  step: number;
}

/** A plain scan: re-evaluating one gain costs far more than comparing all. Ties go to the lowest candidate, so that a repeat chooses the same. */
function largest(from: readonly Remaining[], worth: (gain: number, cost: number) => number): Remaining | undefined {
  let best: Remaining | undefined;
  for (const one of from) if (!best || worth(one.gain, one.cost) > worth(best.gain, best.cost)) best = one;
  return best;
}

/** The most that diminishing gains can add within budget and number: the best gains for their cost, the last in part (whichever limit is tighter). */
function fractionalBound(left: readonly Remaining[], budget: number, picks: number): number {
  const useful = left.filter(({ gain, cost }) => gain > 0 && cost <= budget);
  const byCount = useful
    .map(({ gain }) => gain)
    .sort((a, b) => b - a)
    .slice(0, picks)
    .reduce((sum, gain) => sum + gain, 0);
  let room = budget;
  let byCost = 0;
  for (const { gain, cost } of useful.sort((a, b) => b.gain / b.cost - a.gain / a.cost)) {
    byCost += gain * Math.min(1, room / cost);
    room = Math.max(0, room - cost);
  }
  return Math.min(byCount, byCost);
}
