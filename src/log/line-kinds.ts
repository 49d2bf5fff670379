import { complain, type LineObject, suggestion } from "./fields.js";
import { shown } from "./log-error.js";

/** The field that says what a line is, and the fields such a line may have. */
export type LineKind = "log" | "reading" | "state" | "withdraw" | "forget" | "comment";
export const lineFields: Readonly<Record<LineKind, readonly string[]>> = {
  log: ["log", "title", "units", "deviationUnits", "comment"],
  reading: [
    ...["reading", "states", "value", "standardDeviations", "covariance"],
    ...["instrumentHeight", "targetHeight", "name", "time", "comment"],
  ],
  state: ["state", "kind", "value", "fixed", "comment"],
  withdraw: ["withdraw", "time", "comment"],
  forget: ["forget", "time", "comment"],
  comment: ["comment"],
};
const lineKinds = Object.keys(lineFields) as LineKind[];

/** What a line is, by the one telling field it has. */
export function lineKind(line: LineObject): LineKind {
  const [kind, second] = lineKinds.filter((field) => field !== "comment" && line[field] !== undefined);
  const given = Object.keys(line);
  if (second !== undefined)
    complain({
      code: "LOG_UNKNOWN_LINE",
      field: second,
      value: line[second],
      problem: `the line has both "${kind}" and "${second}".`,
      mend: kind === "reading" && second === "state" ? 'A reading lists its states in "states".' : "Write two lines.",
    });
  if (kind !== undefined) return kind;
  if (line.comment !== undefined) return "comment";
  const near = given.map((field) => suggestion(field, lineKinds)).find((words) => words !== "") ?? "";
  return complain({
    code: "LOG_UNKNOWN_LINE",
    value: line,
    problem: `${shown(line)} does not say what it is.`,
    mend: `${near}A line has one of ${lineKinds.join(", ")}.`,
  });
}
