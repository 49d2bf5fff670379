// The whole run with every block and the newest block column read at each step, rebases included; beside it, at evenly sampled steps, what
// recomputing the same numbers takes.
import { kernel } from "../../bindings/loader.js";
import { information } from "../families/information.js";
import type { Stream } from "../families/stream.js";
import { Recursion } from "../harness/recursion.js";
import { Feed, type StepTimes } from "./feed.js";
import { Own, type OwnTimes } from "./own.js";
import { scalarFactor } from "./scalar-factor.js";

const CANDIDATES = 200;
const REPEATS = 5;

/** What was measured after one sampled step, in milliseconds. */
interface Sample {
  readonly own: OwnTimes;
  /** The published recursion alone: its factor and the column are not counted. */
  readonly recursion: number | undefined;
  /** `evaluate` of 200 candidates on current numbers. */
  readonly evaluate: number;
}

export interface EagerRun {
  readonly steps: StepTimes[];
  readonly samples: Sample[];
  /** At each rebase but the first: bytes of ledger and leaves before it, and all kernel memory beyond factor and the states' own numbers,
   *  as shares of the factor's bytes. */
  readonly ledgerShares: number[];
  readonly kernelShares: number[];
}

/** @param samples steps at which the other sides are timed; 0: none.
 *  @param recursion whether the recursion is among them. */
export function eagerRun(stream: Stream, samples: number, recursion: boolean): EagerRun {
  const before = kernel().memoryUsed();
  const feed = new Feed(stream, { track: "all", reads: true });
  const run: EagerRun = { steps: [], samples: [], ledgerShares: [], kernelShares: [] };
  const sampled = new Set(Array.from({ length: samples }, (_, k) => Math.floor(((k + 0.5) * stream.steps) / samples)));
  const every = Math.ceil(stream.steps / 4000);
  let [ledger, whole] = [0, 0];
  for (let s = 0; s < stream.steps; s += 1) {
    const times = feed.advance();
    run.steps.push(times);
    if (times.report.route === "rebase" && s > 0) {
      run.ledgerShares.push(ledger);
      run.kernelShares.push(whole);
    }
    if (s % every === 0) {
      const { baseBytes, ledgerBytes, order } = feed.estimate.statistics;
      const d = stream.dimension(0);
      ledger = ledgerBytes / baseBytes;
      // A state's own: its block, its part of the kept column and of the right-hand side.
      whole = (kernel().memoryUsed() - before - baseBytes - 8 * order * (2 * d + 1)) / baseBytes;
    }
    if (sampled.has(s)) run.samples.push(sample(feed, stream, s, recursion));
  }
  feed.estimate.dispose();
  return run;
}

function sample(feed: Feed, stream: Stream, step: number, withRecursion: boolean): Sample {
  const made = information(stream, step + 1);
  const own = new Own(made);
  const times = own.times(REPEATS);
  const recursion = withRecursion ? recursionTime(made, own) : undefined;
  own.free();
  const evaluations = Array.from({ length: REPEATS }, () => evaluationTime(feed)).sort((a, b) => a - b);
  return { own: times, recursion, evaluate: evaluations[REPEATS >> 1]! };
}

function recursionTime(made: ReturnType<typeof information>, own: Own): number {
  const recursion = new Recursion(scalarFactor(made, own.elimination()));
  recursion.run();
  const begun = performance.now();
  recursion.run();
  const time = performance.now() - begun;
  recursion.release();
  return time;
}

/** `evaluate` of 200 candidates on the estimate as it stands. */
function evaluationTime(feed: Feed): number {
  const candidates = feed.candidates(CANDIDATES);
  const begun = performance.now();
  feed.estimate.evaluate(candidates);
  return performance.now() - begun;
}

/** The whole run with nobody reading; 200 candidates evaluated after each of some evenly spaced steps, outside the run's time. */
export function lazyRun(stream: Stream, evaluations: number): { steps: StepTimes[]; evaluate: number[] } {
  const feed = new Feed(stream, { track: "all", reads: false });
  const steps: StepTimes[] = [];
  const evaluate: number[] = [];
  const every = Math.floor(stream.steps / evaluations);
  for (let s = 0; s < stream.steps; s += 1) {
    steps.push(feed.advance());
    if (s % every === every - 1) evaluate.push(evaluationTime(feed));
  }
  feed.estimate.dispose();
  return { steps, evaluate };
}

/** The whole run read at each step, with new bases in slices under a budget of so many milliseconds a commit. */
export function slicedRun(stream: Stream, latencyBudget: number): StepTimes[] {
  const feed = new Feed(stream, { track: "all", reads: true, latencyBudget });
  const steps = Array.from({ length: stream.steps }, () => feed.advance());
  feed.estimate.dispose();
  return steps;
}

export interface OnDemand {
  readonly one: number[];
  readonly ten: number[];
  readonly solve: number;
}

/** Marginals of states all over, nothing tracked, a few steps after a new base; and a full solve of the same matrix. */
export function onDemand(stream: Stream, queries: number): OnDemand {
  const stepsAfter = Math.min(100, stream.steps >> 1);
  const feed = new Feed(stream, { track: "none", reads: false });
  feed.skip(stream.steps - stepsAfter);
  for (let s = 0; s < stepsAfter; s += 1) feed.advance();
  const { estimate, ids } = feed;
  /** Scattered evenly: multiples of the golden section, modulo one. */
  const some = (k: number): number => ids[Math.floor(ids.length * ((k * 0.6180339887498949) % 1))]!;
  const time = (run: () => void): number => {
    const begun = performance.now();
    run();
    return performance.now() - begun;
  };
  const asked = (count: number) =>
    Array.from({ length: queries }, (_, q) =>
      time(() => estimate.marginals(Array.from({ length: count }, (_unused, k) => some(count * q + k + 1)))),
    );
  asked(1);
  asked(10);
  const [one, ten] = [asked(1), asked(10)];
  estimate.dispose();
  const own = new Own(information(stream));
  const { solve } = own.times(REPEATS);
  own.free();
  return { one, ten, solve };
}
