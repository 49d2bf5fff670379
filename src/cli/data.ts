// An assessment for programs: JSON and CSV, every digit, SI units and radians.
import type { Assessment, GivenReading, StatePrecision } from "../decide/index.js";
import { lineOf } from "./network.js";

/** The assessment as one JSON object. Arrays are row-major; readings are given by line, name, kind and states; what is infinite is null. */
export function assessmentAsJson(assessment: Assessment, title: string | undefined): string {
  return `${JSON.stringify({ title, ...assessment }, plainData)}\n`;
}

function plainData(key: string, value: unknown): unknown {
  if (value instanceof Float64Array) return Array.from(value);
  if (key === "reading") {
    const { name, kind, states, time } = value as GivenReading;
    return { line: lineOf(value as object), name, kind, states, time };
  }
  return value;
}

const most = { value: 7, deviation: 6, axis: 3 };
const numbered = (name: string, count: number): string[] => Array.from({ length: count }, (_, k) => `${name}_${k + 1}`);

/** One line a state, in the order of the assessment; columns that a kind does not have stay empty. */
export function* statesAsCsv(states: readonly StatePrecision[]): Generator<string> {
  yield `${[
    ...["state", "kind"],
    ...numbered("value", most.value),
    ...numbered("standard_deviation", most.deviation),
    ...numbered("semi_axis", most.axis),
    ...["bearing", "elevation", "limit"],
  ].join(",")}\n`;
  for (const { name, kind, value, standardDeviations, semiAxes, tolerance } of states) {
    const padded = (numbers: readonly number[], length: number) => Array.from({ length }, (_, k) => String(numbers[k] ?? ""));
    yield `${[
      cell(name),
      kind,
      ...padded([...value], most.value),
      ...padded([...standardDeviations], most.deviation),
      ...padded(
        semiAxes.map(({ length }) => length),
        most.axis,
      ),
      String(semiAxes[0]!.bearing ?? ""),
      String(semiAxes[0]!.elevation ?? ""),
      tolerance === undefined ? "" : tolerance.verdict === "fails the limit" ? "fails" : "meets",
    ].join(",")}\n`;
  }
}

/** A cell as RFC 4180 writes it. */
const cell = (text: string): string => (/[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text);
