// From a log to a network: read, applied line by line, solved; with progress, and with the line in every complaint.
import { getHeapStatistics } from "node:v8";
import { Estimate, SigmatideError } from "../index.js";
import { applyEntry, type HeaderEntry, type NumberedEntry, readLog, type TextSource } from "../log/index.js";
import { Adjustment } from "../model/index.js";
import type { Progress } from "./progress.js";
import { grouped } from "./units.js";

export interface LoadedNetwork {
  readonly adjustment: Adjustment;
  readonly estimate: Estimate;
  readonly header: HeaderEntry | undefined;
  /** What was wrong with the log, line by line; empty unless `keepGoing`. */
  readonly problems: readonly SigmatideError[];
  /** Lines passed over because they name a state already complained about. */
  readonly skipped: number;
}

/**
 * @param size bytes of the source, when they are known, for the progress.
 * @throws {SigmatideError} the first line that cannot be used, unless `keepGoing`; a network that cannot be solved, with the lines on which
 *   its states are declared.
 */
export async function loadNetwork(
  source: TextSource,
  { keepGoing, size, progress }: { keepGoing: boolean; size: number | undefined; progress: Progress },
): Promise<LoadedNetwork> {
  const estimate = new Estimate({ track: "all" });
  let iterations = 0;
  const adjustment = new Adjustment(estimate, {
    onIteration: ({ relinearized }) => {
      iterations += 1;
      progress.say(`solving, iteration ${iterations}: ${grouped(relinearized)} readings linearized anew`);
    },
  });
  const reader = readLog(source, { keepGoing });
  const declaredOn = new Map<string, number>();
  const applied: SigmatideError[] = [];
  let header: HeaderEntry | undefined;
  for await (const entry of reader) {
    if (entry.line % 1024 === 0) requireMemory(adjustment.readingCount, entry.line);
    if (entry.line % 1024 === 0 && size) progress.show(Math.min(1, reader.bytesRead / size));
    if (entry.type === "header") header = entry;
    if (entry.type === "state") declaredOn.set(entry.name, entry.line);
    try {
      applyEntry(adjustment, entry);
    } catch (error) {
      if (!(error instanceof SigmatideError)) throw error;
      const told = new SigmatideError(error.code, `line ${entry.line}: ${withLines(error, declaredOn)}`, {
        ...error.details,
        line: entry.line,
      });
      if (!keepGoing) throw told;
      applied.push(told);
    }
  }
  progress.say("solving");
  try {
    adjustment.solve();
  } catch (error) {
    if (!(error instanceof SigmatideError)) throw error;
    throw new SigmatideError(error.code, withLines(error, declaredOn), error.details);
  }
  return { adjustment, estimate, header, problems: [...reader.problems, ...applied].sort(byLine), skipped: reader.skipped };
}

/** Measured: 112 110 readings of the quay, nine rounds, are assessed in a heap of 800 MB, not in one of 600 MB. */
const bytesPerReading = 7000;

/** A network that the process cannot hold is refused while there is still room to say so. */
function requireMemory(readings: number, line: number): void {
  const limit = getHeapStatistics().heap_size_limit;
  const needed = readings * bytesPerReading;
  if (needed <= limit) return;
  const megabytes = (bytes: number) => `${grouped(Math.round(bytes / 1e6))} MB`;
  throw new SigmatideError(
    "NETWORK_TOO_LARGE",
    `line ${line}: the network has come to ${grouped(readings)} readings, which take about ${megabytes(needed)}; this process may use ` +
      `${megabytes(limit)}. Drop states that are done with by "forget" lines, assess the log in parts, or allow more: ` +
      `NODE_OPTIONS=--max-old-space-size=${Math.ceil((4 * needed) / 2 ** 20)}.`,
    { line, readings, needed, limit },
  );
}

const byLine = (a: SigmatideError, b: SigmatideError): number => Number(a.details.line) - Number(b.details.line);

const namesShown = 5;

/** The message, and where the states it names are declared. */
function withLines({ message, details }: SigmatideError, declaredOn: ReadonlyMap<string, number>): string {
  const { names, states } = details;
  const named = [names, states].find((list): list is string[] => Array.isArray(list) && list.some((name) => declaredOn.has(name))) ?? [];
  const places = named.filter((name) => declaredOn.has(name)).map((name) => `"${name}" on line ${declaredOn.get(name)}`);
  if (places.length === 0) return message;
  const more = places.length > namesShown ? `, and ${places.length - namesShown} more` : "";
  return `${message} (Declared: ${places.slice(0, namesShown).join(", ")}${more}.)`;
}

/** The line that a reading was read from. */
export const lineOf = (reading: object): number | undefined => (reading as Partial<NumberedEntry>).line;
