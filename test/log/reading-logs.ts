// What the tests of the log share: a small log in trade units, and reading one to its end.
import type { NumberedEntry } from "../../src/log/entries.js";
import type { TextSource } from "../../src/log/lines.js";
import type { LogError } from "../../src/log/log-error.js";
import { type ReadLogOptions, readLog } from "../../src/log/reader.js";

export const smallLog = `{"log": "sigmatide/1", "title": "Slipway, first visit", "units": {"length": "m", "angle": "gon"}, "deviationUnits": {"length": "mm", "angle": "mgon"}}
{"comment": "two pillars, one mark"}
{"state": "S1", "kind": "point-3d", "value": [100, 200, 5], "fixed": true}
{"state": "S2", "kind": "point-3d", "value": [160, 280, 5.5]}
{"state": "M", "kind": "point-3d"}
{"state": "o1", "kind": "orientation", "value": 12.5}

{"reading": "direction", "states": ["S1", "M", "o1"], "value": 50, "standardDeviations": 0.3, "time": "2031-04-02T06:30:00Z"}
{"reading": "slope-distance", "states": ["S1", "M"], "value": 82.125, "standardDeviations": [1.5], "instrumentHeight": 1.6, "name": "d1", "time": 1200.5}
{"reading": "coordinate-difference", "states": ["S1", "S2"], "value": [60, 80, 0.5], "covariance": [[4, 1, 0], [1, 9, -1], [0, -1, 25]], "comment": "baseline"}
{"withdraw": "d1", "time": 1300}
{"forget": ["M"]}
`;

export async function readAll(source: TextSource, options?: ReadLogOptions): Promise<NumberedEntry[]> {
  const entries: NumberedEntry[] = [];
  for await (const entry of readLog(source, options)) entries.push(entry);
  return entries;
}

/** Reads on past every problem. */
export async function readAnyhow(source: TextSource): Promise<{ entries: NumberedEntry[]; problems: LogError[]; skipped: number }> {
  const reader = readLog(source, { keepGoing: true });
  const entries: NumberedEntry[] = [];
  for await (const entry of reader) entries.push(entry);
  return { entries, problems: reader.problems, skipped: reader.skipped };
}
