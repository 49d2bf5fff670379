// Timing by tinybench: a task is repeated until it has had its time, and the median and quartiles of its samples are kept.
import { Bench } from "tinybench";

export interface Timing {
  /** Milliseconds. */
  readonly median: number;
  /** Quartiles: half of the samples lie between them. */
  readonly low: number;
  readonly high: number;
  readonly samples: number;
}

export interface TimingOptions {
  /** Milliseconds that a task's samples add up to at least. */
  readonly time: number;
  /** Runs before each sample, outside the timer. */
  readonly before?: () => void;
}

export const measure = (run: () => void, options: TimingOptions): Timing => summary(samplesOf(run, options));

/** Samples in milliseconds: three at least, after two runs to warm up. */
function samplesOf(run: () => void, { time, before }: TimingOptions): number[] {
  const bench = new Bench({ time, iterations: 3, warmupTime: time / 5, warmupIterations: 2, retainSamples: true, throws: true });
  bench.add("task", run, before ? { beforeEach: before } : {});
  bench.runSync();
  const result = bench.tasks[0]!.result;
  if (result.state !== "completed") throw new Error(`the task ended ${result.state}`);
  return [...result.latency.samples!];
}

/** Times tasks in turn, several rounds each, so that a slow spell of the machine falls on all of them: samples are pooled.
 *  A task is a function to repeat, or one that takes its own samples for so many milliseconds. */
export function measureInTurn<Name extends string>(
  tasks: Readonly<Partial<Record<Name, TimedTask>>>,
  { time, rounds = 3 }: { readonly time: number; readonly rounds?: number },
): Record<Name, Timing> {
  const pools = Object.entries<TimedTask | undefined>(tasks).flatMap(([name, task]) =>
    task ? [{ name, task, samples: [] as number[] }] : [],
  );
  for (let round = 0; round < rounds; round += 1) {
    for (const { task, samples } of pools)
      samples.push(...("run" in task ? samplesOf(task.run, { ...task, time: time / rounds }) : task.samples(time / rounds)));
  }
  return Object.fromEntries(pools.map(({ name, samples }) => [name, summary(samples)])) as Record<Name, Timing>;
}

export type TimedTask =
  | { readonly run: () => void; readonly before?: () => void }
  | { readonly samples: (time: number) => readonly number[] };

/** Median and quartiles of some samples, in milliseconds. */
export function summary(samples: readonly number[]): Timing {
  const sorted = [...samples].sort((a, b) => a - b);
  const at = (share: number): number => sorted[Math.round(share * (sorted.length - 1))]!;
  return { median: at(0.5), low: at(0.25), high: at(0.75), samples: sorted.length };
}

/** So many times as long. */
export const scaled = ({ median, low, high, samples }: Timing, by: number): Timing => ({
  median: by * median,
  low: by * low,
  high: by * high,
  samples,
});
