// What a section hands back, and how it is shown.
import { type Target, targetCell } from "./targets.js";
import type { Timing } from "./timing.js";

/** One measured line: ours, and what it is compared with in the same run. */
export interface Row {
  /** Family, or the name of the piece. */
  readonly subject: string;
  /** States, or the size of the piece. */
  readonly size: number;
  readonly measure: string;
  /** Left out where the figures or targets are the result. */
  readonly ours?: Timing;
  readonly others?: Readonly<Record<string, Timing>>;
  /** Figures beside the time, such as GFlop/s. */
  readonly figures?: Readonly<Record<string, number>>;
  readonly targets?: readonly Target[];
}

export interface Section {
  readonly name: string;
  /** What runs between the start and the stop of each timer. */
  readonly timers: readonly string[];
  run(options: RunOptions): AsyncGenerator<Row> | Generator<Row>;
}

export interface RunOptions {
  /** Small sizes only, and short samples. */
  readonly quick: boolean;
  /** The largest sizes too, where they take minutes. */
  readonly large: boolean;
  /** Families asked for; all of the section's when empty. */
  readonly families: readonly string[];
  /** Milliseconds of samples for each line. */
  readonly time: number;
}

function duration(milliseconds: number): string {
  const [value, unit] =
    milliseconds >= 1 ? [milliseconds, "ms"] : milliseconds >= 1e-3 ? [milliseconds * 1e3, "µs"] : [milliseconds * 1e6, "ns"];
  return `${value >= 100 ? value.toFixed(0) : value.toPrecision(3)} ${unit}`;
}
const spread = ({ low, high, median }: Timing): string => `±${(((high - low) / 2 / median) * 100).toFixed(0)} %`;
const figure = (value: number): string => (Math.abs(value) >= 100 ? value.toFixed(0) : value.toPrecision(3));

/** A line for people: the median with half the distance of the quartiles; each other's median and how many times ours it is. */
export function line({ subject, size, measure, ours, others = {}, figures = {}, targets = [] }: Row): string {
  const cells = [
    subject.padEnd(16),
    String(size).padStart(7),
    measure.padEnd(16),
    ...(ours ? [duration(ours.median).padStart(8), spread(ours).padStart(6)] : []),
    ...Object.entries(others).map(
      ([name, timing]) => `${name} ${duration(timing.median)}${ours ? ` = ${(timing.median / ours.median).toPrecision(3)} ×` : ""}`,
    ),
    ...Object.entries(figures).map(([name, value]) => `${name} ${figure(value)}`),
    ...targets.map(targetCell),
  ];
  return cells.join("  ");
}
