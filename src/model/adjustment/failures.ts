import { SigmatideError } from "../../errors.js";
import type { AdjustedReading } from "./adjusted-reading.js";
import type { AdjustedState } from "./adjusted-state.js";

/** States that have no value and cannot be given one. */
export function noStartingValue(waiting: readonly AdjustedState[], ambiguous: ReadonlySet<AdjustedState>): SigmatideError {
  const names = waiting.map((state) => `"${state.name}"${ambiguous.has(state) ? " (two places fit its readings)" : ""}`);
  const shown = names.length > 8 ? [...names.slice(0, 8), `and ${names.length - 8} more`] : names;
  return new SigmatideError(
    "NO_STARTING_VALUE",
    `No starting value follows from the readings for ${shown.join(", ")}: give an approximate value, or readings to states that have one.`,
    { states: waiting.map(({ name }) => name), ambiguous: waiting.filter((state) => ambiguous.has(state)).map(({ name }) => name) },
  );
}

/** An adjustment that goes nowhere; names the readings that fit worst, where a blunder or a bad starting value shows. */
export function noConvergence(code: "DIVERGED" | "NOT_CONVERGED", what: string, readings: Iterable<AdjustedReading>): SigmatideError {
  const worst = [...readings]
    .sort((a, b) => b.cost - a.cost)
    .slice(0, 3)
    .map(({ reading, cost }) => ({ reading: reading.name, states: [...reading.states], standardDeviations: Math.sqrt(cost) }));
  const named = worst.map(
    ({ reading, states, standardDeviations }) =>
      `${reading ?? states.join(" – ")} (${standardDeviations.toPrecision(3)} standard deviations)`,
  );
  return new SigmatideError(
    code,
    `${what}. Worst fit: ${named.join("; ")}. Check these readings and the approximate values of their states.`,
    { worst },
  );
}
