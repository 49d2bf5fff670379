// The pairings that an association chooses from.
import { ArgumentError } from "../errors.js";
import type { Verdict } from "../verdict.js";

/** One sighting that may be of one target. */
export interface Pairing {
  /** Index of the sighting, from 0. */
  readonly sighting: number;
  /** Index of the target, from 0; a target is sighted at most once. */
  readonly target: number;
  /** ν, the sighting minus its prediction from the target, length m. */
  readonly innovation: ArrayLike<number>;
}

export interface Association extends Verdict<"settled" | "not settled"> {
  /** Indices of the accepted pairings in the list given, by sighting. */
  readonly accepted: readonly number[];
  /** Sightings left without a target. */
  readonly unmatched: readonly number[];
  /** Hypotheses looked at. */
  readonly work: number;
}

/** The indices of pairings by sighting, most plausible first by `order`. @throws {ArgumentError} an index that is no whole number from 0. */
export function bySighting(pairings: readonly Pairing[], sightings: number, order: (pairing: number) => number): number[][] {
  if (!(Number.isInteger(sightings) && sightings >= 0)) throw new ArgumentError("sightings", sightings, "give their number.");
  const lists: number[][] = Array.from({ length: sightings }, () => []);
  for (const [k, { sighting, target }] of pairings.entries()) {
    const list = lists[sighting];
    if (!list) throw new ArgumentError(`pairings[${k}].sighting`, sighting, `sightings count from 0 to ${sightings - 1}.`);
    if (!(Number.isInteger(target) && target >= 0))
      throw new ArgumentError(`pairings[${k}].target`, target, "give the index of a target, from 0.");
    list.push(k);
  }
  for (const list of lists) list.sort((a, b) => order(a) - order(b));
  return lists;
}
