// What every verdict carries, and the words and numbers its sentence is made of.
import type { Distribution } from "./distributions.js";

/** A decision with its grounds: plain data, ready for JSON. */
export interface Verdict<Outcome extends string> {
  readonly statistic: number;
  /** Name of the distribution the statistic follows when nothing is wrong, and its degrees of freedom. */
  readonly distribution: string;
  readonly degreesOfFreedom: readonly number[];
  /** The chance of a false alarm that was allowed. */
  readonly level: number;
  /** The statistic beyond which the verdict turns. */
  readonly threshold: number;
  /** The chance of a statistic at least this far out when nothing is wrong. */
  readonly probability: number;
  readonly verdict: Outcome;
  /** One sentence for a person. */
  readonly because: string;
}

/** One-sided test: large statistics speak against the hypothesis. */
export function upperTest(statistic: number, distribution: Distribution, level: number): Omit<Verdict<string>, "verdict" | "because"> {
  const { name, degreesOfFreedom } = distribution;
  const threshold = distribution.isf(level);
  return { statistic, distribution: name, degreesOfFreedom, level, threshold, probability: distribution.sf(statistic) };
}

/** Three significant digits unless told otherwise, without a string of zeros at either end. */
export const inWords = (value: number, digits = 3): string => String(Number(value.toPrecision(digits)));

/** A probability as percent with two significant digits. */
export const percent = (probability: number): string => `${Number((100 * probability).toPrecision(2))} %`;
