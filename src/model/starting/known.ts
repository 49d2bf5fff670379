import type { StateAt } from "../states.js";

/** A state that has a value, by name. */
export type Known = (name: string) => StateAt | undefined;

/** Of a reading between two states, the one that is not `name`, when it has a value. */
export function otherEnd(name: string, states: readonly string[], known: Known): StateAt | undefined {
  const other = states.find((state) => state !== name);
  return states.length === 2 && other !== undefined ? known(other) : undefined;
}
