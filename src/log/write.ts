import { findForm, readingKinds } from "../model/reading-kinds.js";
import { type StateKindName, stateKinds } from "../model/states.js";
import type { HeaderEntry, LogEntry } from "./entries.js";
import { formatName } from "./header.js";
import { siUnits, type Units, unitSize } from "./units.js";

/**
 * Writes entries as the lines of a log, without line ends, in the units of the header entry among them (SI before one comes).
 * Numbers in SI units are written so that reading gives the same bits; a converted number is written with 15 significant digits.
 */
export class LogWriter {
  #units: Units = siUnits;
  #deviationUnits: Units = siUnits;
  readonly #kinds = new Map<string, StateKindName>();

  /** The line of one entry. States must be written before the readings on them. */
  line(entry: LogEntry): string {
    return JSON.stringify(this.#object(entry));
  }

  #object(entry: LogEntry): object {
    switch (entry.type) {
      case "comment":
        return { comment: entry.text };
      case "header": {
        this.#units = entry.units;
        this.#deviationUnits = entry.deviationUnits;
        return headerObject(entry);
      }
      case "state": {
        this.#kinds.set(entry.name, entry.kind);
        const { quantities } = stateKinds[entry.kind];
        const value = entry.value && list(entry.value, (k) => unitSize(quantities[k]!, this.#units));
        return { state: entry.name, kind: entry.kind, value, ...(entry.fixed ? { fixed: true } : {}) };
      }
      case "withdraw":
        return { withdraw: entry.reading, time: entry.time };
      case "forget":
        return { forget: entry.states, time: entry.time };
      case "reading": {
        const form = findForm(
          readingKinds[entry.kind],
          entry.states.map((state) => this.#kinds.get(state)!),
        )!;
        const sizes = form.rowQuantities.map((quantity) => unitSize(quantity, this.#deviationUnits));
        const rows = sizes.length;
        const { covariance } = entry;
        const metre = unitSize("length", this.#units);
        return {
          reading: entry.kind,
          states: entry.states,
          value: list(entry.value, (k) => unitSize(form.quantities[k]!, this.#units)),
          standardDeviations: entry.standardDeviations && list(entry.standardDeviations, (k) => sizes[k]!),
          covariance:
            covariance &&
            sizes.map((size, i) =>
              Array.from(covariance.subarray(i * rows, (i + 1) * rows), (number, j) => inUnit(number, size * sizes[j]!)),
            ),
          instrumentHeight: entry.setup?.instrumentHeight && inUnit(entry.setup.instrumentHeight, metre),
          targetHeight: entry.setup?.targetHeight && inUnit(entry.setup.targetHeight, metre),
          name: entry.name,
          time: entry.time,
        };
      }
    }
  }
}

function headerObject({ title, units, deviationUnits }: HeaderEntry): object {
  return { log: formatName, title, units, deviationUnits };
}

const inUnit = (number: number, size: number): number => (size === 1 ? number : Number((number / size).toPrecision(15)));

/** One number stands without brackets. */
function list(numbers: Float64Array, size: (index: number) => number): number | number[] {
  const written = Array.from(numbers, (number, k) => inUnit(number, size(k)));
  return written.length === 1 ? written[0]! : written;
}
