// A stream fed into an estimate step by step, each part of a step timed.
import { type CommitReport, Estimate, type EstimateOptions, type MeasurementInput, type StateId } from "../../src/index.js";
import type { Stream } from "../families/stream.js";

/** One step, in milliseconds. */
export interface StepTimes {
  readonly step: number;
  /** Whether rows between states that were there already came in. */
  readonly revisit: boolean;
  /** Adding states and measurements, and the commit. */
  readonly commit: number;
  /** Reading every block and the newest block column; 0 when nobody reads. */
  readonly read: number;
  readonly report: CommitReport;
}

interface Arrivals {
  readonly dimensions: readonly number[];
  readonly measurements: readonly MeasurementInput[];
}

export class Feed {
  readonly estimate: Estimate;
  readonly ids: StateId[] = [];
  readonly #stream: Stream;
  readonly #reads: boolean;
  /** What is read goes into the same arrays at every step, as a caller who reads that often would have it. */
  readonly #blocks: Float64Array;
  readonly #column: Float64Array;
  #blockNumbers = 0;
  #order = 0;
  #next = 0;

  constructor(stream: Stream, { reads, ...options }: EstimateOptions & { readonly reads: boolean }) {
    this.#stream = stream;
    this.#reads = reads;
    let [blockNumbers, order, widest] = [0, 0, 0];
    for (let s = 0; s < stream.states; s += 1) {
      const d = stream.dimension(s);
      blockNumbers += d * d;
      order += d;
      widest = Math.max(widest, d);
    }
    this.#blocks = new Float64Array(reads ? blockNumbers : 0);
    this.#column = new Float64Array(reads ? order * widest : 0);
    this.estimate = new Estimate(options);
    if (options.track === "all") this.estimate.track("all", { column: "newest" });
  }

  get steps(): number {
    return this.#stream.steps;
  }

  /** Adds the next `count` steps in one commit, so that the base is fresh. */
  skip(count: number): void {
    for (const end = this.#next + count; this.#next < end; this.#next += 1) this.#add(this.#inputs());
    this.estimate.commit();
  }

  /** The next step: what arrives is made before the timer starts. */
  advance(): StepTimes {
    const { estimate } = this;
    const inputs = this.#inputs();
    const begun = performance.now();
    this.#add(inputs);
    const report = estimate.commit();
    const committed = performance.now();
    if (this.#reads) {
      const newest = this.ids.at(-1)!;
      estimate.marginals(undefined, this.#blocks.subarray(0, this.#blockNumbers));
      estimate.blockColumn(newest, this.#column.subarray(0, this.#order * this.#stream.dimension(newest)));
    }
    const read = performance.now();
    const revisit = inputs.measurements.length > inputs.dimensions.length;
    const step = this.#next;
    this.#next += 1;
    return { step, revisit, commit: committed - begun, read: read - committed, report };
  }

  #inputs(): Arrivals {
    const { firstState, lastState, firstMeasurement, lastMeasurement } = this.#stream.step(this.#next);
    const dimensions: number[] = [];
    const measurements: MeasurementInput[] = [];
    for (let s = firstState; s < lastState; s += 1) dimensions.push(this.#stream.dimension(s));
    // States of one estimate that forgets none are numbered in order of arrival, as the stream's are.
    for (let m = firstMeasurement; m < lastMeasurement; m += 1) measurements.push(this.#stream.measurement(m));
    return { dimensions, measurements };
  }

  #add({ dimensions, measurements }: Arrivals): void {
    for (const dimension of dimensions) {
      this.ids.push(this.estimate.addState(dimension));
      this.#blockNumbers += dimension ** 2;
      this.#order += dimension;
    }
    for (const measurement of measurements) this.estimate.addMeasurement(measurement);
  }

  /** Relative readings of the newest state from earlier ones, spread evenly: what an association would ask. */
  candidates(count: number): MeasurementInput[] {
    const newest = this.ids.at(-1)!;
    const d = this.#stream.dimension(newest);
    const [back, forth] = [-1, 1].map((sign) => Float64Array.from({ length: d * d }, (_, k) => (k % (d + 1) === 0 ? sign : 0)));
    return Array.from({ length: count }, (_, k) => ({
      states: [Math.floor((k * newest) / count), newest],
      jacobians: [back!, forth!],
      residual: new Float64Array(d),
      standardDeviations: new Float64Array(d).fill(0.05),
    }));
  }
}
