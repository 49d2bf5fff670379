import type { ReadingEntry } from "../log/entries.js";
import { findForm, type ReadingKindName, readingKinds } from "../model/reading-kinds.js";
import type { StateAt } from "../model/states.js";
import type { Random } from "../support/random.js";

/** A reading of the true states with Gaussian noise of the given standard deviations, and `offset` on its first number when it is a blunder. */
export function simulateReading(
  kind: ReadingKindName,
  states: readonly StateAt[],
  standardDeviations: readonly number[],
  noise: Random,
  more: { name: string; time: string; offset?: number },
): ReadingEntry {
  const form = findForm(
    readingKinds[kind],
    states.map((state) => state.kind.name),
  )!;
  const { offset = 0, ...rest } = more;
  const value = form.predict(states).map((number, k) => number + standardDeviations[k]! * noise.normal() + (k === 0 ? offset : 0));
  return {
    type: "reading",
    kind,
    states: states.map((state) => state.name),
    value,
    standardDeviations: Float64Array.from(standardDeviations),
    ...rest,
  };
}
