// The estimate kept current while a stream arrives, beside recomputing at every step.
import type { Stream } from "../families/stream.js";
import { type FamilyName, families } from "../families.js";
import type { Row, RunOptions, Section } from "../harness/report.js";
import { atLeast, atMost, type Target } from "../harness/targets.js";
import { summary } from "../harness/timing.js";
import { type EagerRun, eagerRun, lazyRun, onDemand, slicedRun } from "../incremental/eager.js";
import type { StepTimes } from "../incremental/feed.js";

/** Sizes in states: always, and with --large. */
interface Ladder {
  readonly family: FamilyName;
  readonly sizes: readonly number[];
  readonly large?: readonly number[];
}

const eager: readonly Ladder[] = [
  { family: "heavy", sizes: [1000, 10_000], large: [100_000] },
  { family: "heavySpatial", sizes: [1000, 10_000] },
  { family: "net", sizes: [1000, 10_000], large: [100_000] },
  { family: "chain", sizes: [1000, 10_000], large: [100_000] },
];
const demanded: readonly Ladder[] = [
  { family: "patrol", sizes: [10_000] },
  { family: "net", sizes: [10_000] },
  { family: "chain", sizes: [10_000, 100_000] },
];

const quickStates = 1000;
const lazyFamilies: readonly FamilyName[] = ["heavy", "net"];

/** Sums over a run: times as long as ours. */
const floors: Readonly<Record<string, { readonly recursion?: number; readonly own: number }>> = {
  "heavy 1000": { recursion: 70, own: 40 },
  "heavy 10000": { recursion: 250, own: 100 },
  "heavy 100000": { own: 200 },
  "net 1000": { recursion: 20, own: 12 },
  "net 10000": { recursion: 70, own: 25 },
  "chain 10000": { recursion: 20, own: 100 },
};
/** One and ten marginals on demand ÷ one full solve, at most. */
const shares: Readonly<Record<string, { readonly one: number; readonly ten?: number }>> = {
  "patrol 10000": { one: 1 / 6, ten: 1 },
  "net 10000": { one: 1 / 6, ten: 1 },
  "chain 100000": { one: 1 / 1000 },
};

function* cases(ladders: readonly Ladder[], { families: asked, quick, large: allowed }: RunOptions) {
  for (const { family, sizes, large = [] } of ladders) {
    if (asked.length > 0 && !asked.includes(family)) continue;
    for (const states of [...sizes, ...(allowed ? large : [])]) {
      if (!quick || states <= quickStates) yield { family, states, stream: families[family].make(states) };
    }
  }
}

const sum = (values: readonly number[]): number => values.reduce((total, value) => total + value, 0);
const mean = (values: readonly number[]): number => sum(values) / values.length;
const stepTime = ({ commit, read }: StepTimes): number => commit + read;
const quantile = (values: readonly number[], share: number): number => {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))]!;
};

/** Passes over the same stream, which all take the same routes: each step's times are medians over them, so that a step during which the
 *  machine did something else does not count for many. The first pass is also the one that is sampled. */
function medianRun(stream: Stream, samples: number, recursion: boolean): EagerRun {
  const passes = stream.states > 10_000 ? 1 : stream.states > 1000 ? 3 : 7;
  const first = eagerRun(stream, samples, recursion);
  const runs = [first, ...Array.from({ length: passes - 1 }, () => eagerRun(stream, 0, false))];
  const steps = first.steps.map((step, k) => {
    const middle = (part: "commit" | "read"): number =>
      quantile(
        runs.map((run) => run.steps[k]![part]),
        0.5,
      );
    return { ...step, commit: middle("commit"), read: middle("read") };
  });
  return { ...first, steps };
}

function* rows(family: FamilyName, states: number, stream: Stream): Generator<Row> {
  const withRecursion = states <= 10_000;
  const run = medianRun(stream, states > 10_000 ? 3 : 8, withRecursion);
  const times = run.steps.map(stepTime);
  const rebases = run.steps.filter(({ report }, k) => k > 0 && report.route === "rebase");
  const own = mean(run.samples.map(({ own: { factor, inverse, column } }) => factor + inverse + column));
  const step = mean(times);
  const floor = floors[`${family} ${states}`];
  const recursion = withRecursion ? mean(run.samples.map((sample) => sample.recursion!)) : undefined;
  const revisits = run.steps.filter(({ revisit, report }) => revisit && report.route === "ledger");
  const plain = run.steps.filter(({ revisit, report }) => !revisit && report.route === "ledger");
  yield {
    subject: family,
    size: states,
    measure: "eager step",
    ours: summary(times),
    figures: {
      "mean ms": step,
      "of it rebases": sum(rebases.map(stepTime)) / sum(times),
      rebases: rebases.length,
      "revisit ms": revisits.length ? quantile(revisits.map(stepTime), 0.5) : Number.NaN,
      "plain ms": plain.length ? quantile(plain.map(stepTime), 0.5) : Number.NaN,
      "own ms": own,
      "own factor ms": mean(run.samples.map((sample) => sample.own.factor)),
      ...(recursion !== undefined && { "recursion ms": recursion }),
    },
    targets: [
      ...(recursion === undefined ? [] : [atLeast("recursion ÷ ours", recursion / step, floor?.recursion)]),
      atLeast("own ÷ ours", own / step, floor?.own),
    ],
  };
  const current = run.samples.map((sample) => sample.evaluate);
  const solved = mean(run.samples.map((sample) => sample.own.factor + sample.own.solve));
  const reading = revisits.length
    ? quantile(
        revisits.map(({ read }) => read),
        0.5,
      )
    : 0;
  yield {
    subject: family,
    size: states,
    measure: "200 candidates",
    ours: summary(current),
    figures: { "factor + solve ms": solved, "a revisit's reading ms": reading },
    targets: [atMost("(reading + candidates) ÷ (factor + solve)", (reading + mean(current)) / solved, 0.2)],
  };
  if (run.ledgerShares.length > 0)
    yield {
      subject: family,
      size: states,
      measure: "memory",
      figures: {
        "ledger's share, median": quantile(run.ledgerShares, 0.5),
        "all kernel memory's, median": quantile(run.kernelShares, 0.5),
        "all kernel memory's, last": run.kernelShares.at(-1)!,
      },
      targets: [atMost("ledger ÷ factor bytes, last rebase", run.ledgerShares.at(-1)!, 0.25)],
    };
  if (!lazyFamilies.includes(family)) return;
  yield lazyRow(family, states, stream, own);
  if (revisits.length > 0) yield slicedRow(family, states, stream, quantile(revisits.map(stepTime), 0.5));
}

function lazyRow(family: FamilyName, states: number, stream: Stream, own: number): Row {
  const { steps, evaluate } = lazyRun(stream, 20);
  const commits = steps.map(({ commit }) => commit);
  const bound = family === "heavy" && states >= 10_000;
  return {
    subject: family,
    size: states,
    measure: "lazy step",
    ours: summary(commits),
    figures: { "mean ms": mean(commits), rebases: steps.filter(({ report }) => report.route === "rebase").length - 1 },
    targets: [
      atLeast("own ÷ ours, nobody reads", own / mean(commits), bound ? 500 : undefined),
      atMost("200 candidates after a step, ms", quantile(evaluate, 0.5), bound ? Math.max(1, own / 100) : undefined),
    ],
  };
}

function slicedRow(family: FamilyName, states: number, stream: Stream, budget: number): Row {
  const steps = slicedRun(stream, budget).slice(1);
  const commits = steps.map(({ commit }) => commit);
  const whole = steps.map(stepTime);
  const middle = quantile(steps.filter(({ revisit }) => revisit).map(stepTime), 0.5);
  const rebases = steps.filter(({ report }) => report.route === "rebase").length;
  return {
    subject: family,
    size: states,
    measure: "sliced commit",
    ours: summary(commits),
    figures: {
      "budget ms": budget,
      rebases,
      "99 %": quantile(commits, 0.99),
      "99.9 %": quantile(commits, 0.999),
      worst: Math.max(...commits),
      "median revisit, read ms": middle,
      "step 99.9 %": quantile(whole, 0.999),
      "step worst": Math.max(...whole),
    },
    targets: [atMost("99.9th percentile of a commit ÷ median revisit", quantile(commits, 0.999) / middle, 4)],
  };
}

function demandRow(family: FamilyName, states: number, stream: Stream): Row {
  const { one, ten, solve } = onDemand(stream, 100);
  const bound = shares[`${family} ${states}`];
  return {
    subject: family,
    size: states,
    measure: "on demand",
    ours: summary(one),
    figures: { "ten ms": quantile(ten, 0.5), "full solve ms": solve },
    targets: [
      atMost("one marginal ÷ full solve", quantile(one, 0.5) / solve, bound?.one),
      atMost("ten marginals ÷ full solve", quantile(ten, 0.5) / solve, bound?.ten),
    ] satisfies Target[],
  };
}

export const incremental: Section = {
  name: "incremental",
  timers: [
    "eager step: addState, addMeasurement, commit, marginals() of all states, blockColumn(newest); all steps of the run, rebases included",
    "own: numbers of the factor, selected inverse with diagonal blocks copied out, newest block column, in the order of a base, without order and symbolic; at 8 (above 10 000 states: 3) evenly spaced steps, between steps of the run, median of 5 each",
    "recursion: the published recursion alone on the exact pattern of L in the same order, at the same steps; neither its factor nor the column is counted; up to 10 000 states",
    "ratios: mean over those steps ÷ mean over all steps of the run; each step the median of seven passes (10 000 states: three, more: one)",
    "200 candidates: evaluate() of relative readings between the newest state and 200 others, at the same steps, on current numbers",
    "lazy step: addState, addMeasurement, commit; everything tracked, nobody reads; 200 candidates after 20 evenly spaced steps, outside the run's time",
    "on demand: marginals([s]), 100 times, states all over, nothing tracked, 100 steps after a new base; full solve: forward and backward with one right-hand side in the kernel",
    "sliced commit: as eager step but the commit alone, with latencyBudget = the median time of a revisit in the eager run; a revisit's median: with its reading",
  ],
  *run(options) {
    for (const { family, states, stream } of cases(eager, options)) yield* rows(family, states, stream);
    for (const { family, states, stream } of cases(demanded, options)) yield demandRow(family, states, stream);
  },
};
