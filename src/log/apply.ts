import type { Adjustment } from "../model/adjustment.js";
import type { LogEntry } from "./entries.js";

/** Hands one entry of a log to an adjustment. Readings and withdrawals count from its next `solve`; a forget line solves first. */
export function applyEntry(adjustment: Adjustment, entry: LogEntry): void {
  if (entry.type === "state") adjustment.addState(entry);
  else if (entry.type === "reading") adjustment.addReading(entry);
  else if (entry.type === "withdraw") adjustment.withdraw(entry.reading);
  else if (entry.type === "forget") adjustment.forget(entry.states);
}
