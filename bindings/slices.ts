// Long kernel calls: to the end at once, or in slices of a few milliseconds between which the thread's other work goes on.
import { status } from "./kernel.js";

/** One long call: `advance` does about `budget` nanoseconds of work and returns a status, `progress` tells the share done. */
export interface SlicedCall {
  advance(budget: number): number;
  progress(): number;
  /** The shares of the whole work at which this call begins and ends; 0 and 1 when it is the whole. */
  from?: number;
  to?: number;
}

export interface SliceOptions {
  /** Stops the work at the next slice and rejects with the signal's reason; whatever the work had allocated is given back. */
  signal?: AbortSignal | undefined;
  /** Told after each slice: work done ÷ work predicted, 0 to 1, never falling. */
  onProgress?: ((fraction: number) => void) | undefined;
}

/** Half a frame of a page at 60 frames a second. */
const SLICE_MILLISECONDS = 8;
const FIRST_BUDGET = 2e6;
const WHOLE = 1e18;

function runToEnd(call: SlicedCall): number {
  for (;;) {
    const result = call.advance(WHOLE);
    if (result !== status.running) return result;
  }
}

async function runInSlices(call: SlicedCall, { signal, onProgress }: SliceOptions): Promise<number> {
  const { from = 0, to = 1 } = call;
  for (let budget = FIRST_BUDGET; ; ) {
    const begun = performance.now();
    const result = call.advance(budget);
    const milliseconds = performance.now() - begun;
    onProgress?.(from + (to - from) * (result === status.running ? call.progress() : 1));
    if (result !== status.running) return result;
    budget *= Math.min(2, Math.max(0.25, SLICE_MILLISECONDS / Math.max(milliseconds, 0.1)));
    await pause();
    signal?.throwIfAborted();
  }
}

/** Work made of long calls: yields each, is told the status it ended with, and returns the result. What it holds it frees in `finally`
 *  blocks, which run too when it is dropped halfway. */
export type Steps<T> = Generator<SlicedCall, T, number>;

/** Steps that are the part `from` … `to` of a larger whole: their progress is scaled. */
export function* part<T>(steps: Steps<T>, from: number, to: number): Steps<T> {
  try {
    let step = steps.next(status.ok);
    while (!step.done) {
      const call = step.value;
      step = steps.next(
        yield {
          advance: (budget) => call.advance(budget),
          progress: () => call.progress(),
          from: from + (to - from) * (call.from ?? 0),
          to: from + (to - from) * (call.to ?? 1),
        },
      );
    }
    return step.value;
  } finally {
    steps.return(undefined as never);
  }
}

/** Runs all steps to the end at once. */
export function runSteps<T>(steps: Steps<T>): T {
  try {
    let step = steps.next(status.ok);
    while (!step.done) step = steps.next(runToEnd(step.value));
    return step.value;
  } finally {
    steps.return(undefined as never);
  }
}

/** Runs the same steps in slices. */
export async function runStepsInSlices<T>(steps: Steps<T>, options: SliceOptions): Promise<T> {
  try {
    options.signal?.throwIfAborted();
    let step = steps.next(status.ok);
    while (!step.done) {
      options.signal?.throwIfAborted();
      step = steps.next(await runInSlices(step.value, options));
    }
    return step.value;
  } finally {
    steps.return(undefined as never);
  }
}

/** Lets the event loop turn once: timers, messages, painting. A timer of zero would wait 4 ms in pages. */
function pause(): Promise<void> {
  return new Promise((resolve) => {
    if (typeof setImmediate === "function") {
      setImmediate(resolve);
      return;
    }
    const { port1, port2 } = new MessageChannel();
    port1.onmessage = () => {
      port1.close();
      resolve();
    };
    port2.postMessage(null);
  });
}
