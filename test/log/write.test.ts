import fc from "fast-check";
import { describe, expect, test } from "vitest";
import type { LogEntry, NumberedEntry } from "../../src/log/entries.js";
import { siUnits, type Units, unitSizes } from "../../src/log/units.js";
import { LogWriter } from "../../src/log/write.js";
import { type ReadingKindName, readingKinds } from "../../src/model/reading-kinds.js";
import { real, stateOf } from "../model/arbitraries.js";
import { readAll, smallLog } from "./reading-logs.js";

const write = (entries: readonly LogEntry[]) => {
  const writer = new LogWriter();
  return entries.map((entry) => `${writer.line(entry)}\n`).join("");
};
const unnumbered = (entries: NumberedEntry[]): LogEntry[] => entries.map(({ line, ...entry }) => entry);

const units: fc.Arbitrary<Units> = fc.record({
  length: fc.constantFrom(...(Object.keys(unitSizes.length) as Units["length"][])),
  angle: fc.constantFrom(...(Object.keys(unitSizes.angle) as Units["angle"][])),
  time: fc.constantFrom(...(Object.keys(unitSizes.time) as Units["time"][])),
});

/** A random reading of any kind with the states it needs. */
const readingWithStates: fc.Arbitrary<LogEntry[]> = fc
  .constantFrom(...(Object.keys(readingKinds) as ReadingKindName[]))
  .chain((kind) => fc.constantFrom(...readingKinds[kind].forms).map((form) => ({ kind, form })))
  .chain(({ kind, form }) =>
    fc
      .record({
        states: fc.tuple(...form.states.map((kinds) => fc.constantFrom(...kinds).chain(stateOf))),
        deviations: fc.tuple(...form.rowQuantities.map(() => real(1e-4, 10))),
        correlation: fc.option(fc.oneof(fc.constant(0), real(0.01, 0.15), real(-0.15, -0.01)), { nil: undefined }),
        time: fc.option(fc.oneof(real(0, 1e9), fc.constant("2031-05-01T00:00:00+02:00")), { nil: undefined }),
      })
      .map(({ states, deviations, correlation, time }): LogEntry[] => {
        const named = states.map((state, k) => ({ ...state, name: `s${k}` }));
        const value = form.predict(
          named.map((state, k) => ({
            ...state,
            value: k === 0 ? state.value : state.kind.retract(state.value, Array(state.kind.dimension).fill(0.5)),
          })),
        );
        const covariance = Float64Array.from(deviations.flatMap((a, i) => deviations.map((b, j) => a * b * (i === j ? 1 : correlation!))));
        return [
          ...named.map(({ name, kind, value }): LogEntry => ({ type: "state", name, kind: kind.name, value, fixed: name === "s1" })),
          {
            type: "reading",
            kind,
            states: named.map(({ name }) => name),
            value,
            ...(correlation === undefined ? { standardDeviations: Float64Array.from(deviations) } : { covariance }),
            ...(kind === "zenith-angle" ? { setup: { instrumentHeight: 1.55, targetHeight: 0 } } : {}),
            ...(time === undefined ? {} : { time }),
            name: "r",
          },
          { type: "withdraw", reading: "r" },
          { type: "forget", states: ["s0"] },
          { type: "comment", text: "“done”" },
        ];
      }),
  );

describe("writing a log", () => {
  test("in SI units, what is written reads back to the same bits", async () => {
    await fc.assert(
      fc.asyncProperty(readingWithStates, async (entries) => {
        const header: LogEntry = { type: "header", title: "t", units: siUnits, deviationUnits: siUnits };
        for (const log of [entries, [header, ...entries]]) {
          const back = unnumbered(await readAll(write(log)));
          expect(JSON.stringify(back)).toBe(JSON.stringify(unnumbered(await readAll(write(back)))));
          for (const [k, entry] of back.entries()) closeTo(entry, log[k]!, 4 * Number.EPSILON); // a unit quaternion is normalized once more
        }
      }),
    );
  });

  test("in any units, what is written reads back to 15 digits", async () => {
    await fc.assert(
      fc.asyncProperty(readingWithStates, units, units, async (entries, values, deviations) => {
        const log: LogEntry[] = [{ type: "header", units: values, deviationUnits: deviations }, ...entries];
        for (const [k, entry] of unnumbered(await readAll(write(log))).entries()) closeTo(entry, log[k]!, 2e-14);
      }),
    );
  });

  test("a hand-written log, read and written, says the same in the same numbers", async () => {
    const lines = write(unnumbered(await readAll(smallLog)))
      .trimEnd()
      .split("\n");
    const original = smallLog.split("\n").filter(Boolean);
    for (const [k, line] of lines.entries()) {
      const { comment, ...expected } = JSON.parse(original[k]!);
      const { comment: _comment, ...written } = JSON.parse(line);
      if ("units" in expected) {
        expected.units.time = "s";
        expected.deviationUnits.time = "s";
      }
      if (Array.isArray(expected.standardDeviations)) expected.standardDeviations = expected.standardDeviations[0];
      expect(written).toEqual(expected);
    }
    expect(lines).toHaveLength(original.length);
  });
});

/** Equal entries, numbers within a share of the larger one; angles and quaternions are of the size of one. */
function closeTo(entry: LogEntry, expected: LogEntry, share: number): void {
  const numbers = ["value", "standardDeviations", "covariance"] as const;
  const rest = (from: object) =>
    Object.fromEntries(Object.entries(from).filter(([key]) => !(numbers as readonly string[]).includes(key) && key !== "setup"));
  expect(rest(entry)).toEqual(rest(expected));
  for (const field of numbers) {
    const [found, wanted] = [entry, expected].map((one) => (one as Partial<Record<typeof field, Float64Array>>)[field]);
    expect(found?.length).toBe(wanted?.length);
    for (const [k, number] of (wanted ?? []).entries()) {
      const apart = Math.abs(found![k]! - number);
      // An angle within rounding of a half turn may come back from the other side.
      const off = field === "value" ? Math.min(apart, Math.abs(apart - 2 * Math.PI)) : apart;
      expect(off).toBeLessThanOrEqual(share * (field === "value" ? Math.max(1, Math.abs(number)) : Math.abs(number)));
    }
  }
}
