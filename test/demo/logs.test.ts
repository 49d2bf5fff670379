// The demonstration logs against the truth kept beside them.
import Ajv from "ajv/dist/2020.js";
import { describe, expect, test } from "vitest";
import { quayMonitoring } from "../../src/demo/monitoring.js";
import { yardPatrol } from "../../src/demo/patrol.js";
import type { LogEntry, ReadingEntry } from "../../src/log/entries.js";
import schema from "../../src/log/log.schema.json" with { type: "json" };
import { LogReader } from "../../src/log/reader.js";
import { LogWriter } from "../../src/log/write.js";
import { findForm, readingKinds } from "../../src/model/reading-kinds.js";
import { startingValues } from "../../src/model/starting/starting-values.js";
import { type StateAt, stateKinds } from "../../src/model/states.js";

function* lines(entries: Iterable<LogEntry>): Generator<string> {
  const writer = new LogWriter();
  for (const entry of entries) yield `${writer.line(entry)}\n`;
}

const readings = (entries: readonly LogEntry[]) => entries.filter((entry): entry is ReadingEntry => entry.type === "reading");
const declarations = (entries: readonly LogEntry[]) => entries.filter((entry) => entry.type === "state");

/** Residuals over standard deviations at the true states, by reading name. States whose truth is not kept (orientations) take part through `at`. */
function standardized(entries: readonly LogEntry[], at: (name: string) => StateAt): Map<string, number[]> {
  return new Map(
    readings(entries).map((reading) => {
      const states = reading.states.map(at);
      const form = findForm(
        readingKinds[reading.kind],
        states.map((state) => state.kind.name),
      )!;
      const residual = form.residual(states, reading.value, reading.setup);
      return [reading.name!, Array.from(residual, (number, k) => number / reading.standardDeviations![k]!)];
    }),
  );
}

const stateAt = (name: string, value: readonly number[], kind: "point-2d" | "point-3d" | "planar-pose"): StateAt => ({
  name,
  kind: stateKinds[kind],
  value: Float64Array.from(value),
});

describe("the monitoring of Lantern Quay", () => {
  const { entries, truth } = quayMonitoring();
  const all = [...entries];
  const kinds = new Map(declarations(all).map(({ name, kind }) => [name, kind]));

  test("240 marks, 8 pillars, 60 days, three blunders, one settled bollard", () => {
    const marks = new Set([...kinds.keys()].filter((name) => name.includes("@")).map((name) => name.split("@")[0]));
    expect(marks.size).toBe(240);
    expect([...kinds.keys()].filter((name) => /^S\d$/.test(name))).toHaveLength(8);
    const times = readings(all).map(({ time }) => Date.parse(time as string));
    const days = (Math.max(...times) - Math.min(...times)) / 86_400_000;
    expect(days).toBeGreaterThan(56);
    expect(days).toBeLessThan(60);
    expect(truth.blunders).toHaveLength(3);
    expect(truth.settlement.bollard).toBe("B11.0");
  });

  test("the true marks stand still but for a bowl about the bollard of bay 11, from the fourth epoch on", () => {
    const moved = new Map(truth.settlement.moved.map((mark) => [mark.mark, mark]));
    expect(truth.settlement.moved[0]!.mark).toMatch(/^B11\./);
    expect(truth.settlement.moved[0]!.down).toBeCloseTo(0.0075, 12);
    for (const name of new Set([...kinds.keys()].filter((name) => name.includes("@")).map((name) => name.split("@")[0]!))) {
      const at = (epoch: number) => truth.positions[`${name}@${epoch}`]!;
      expect(at(3)).toEqual(at(1));
      const gone = Math.hypot(...at(6).map((number, k) => number - at(1)[k]!));
      if (moved.has(name)) expect(at(1)[2]! - at(6)[2]!).toBeCloseTo(moved.get(name)!.down, 10);
      else expect(gone).toBeLessThan(1e-3);
    }
    for (const name of moved.keys()) expect(name).toMatch(/^B(09|1[0-3])\./);
  });

  test("at the truth the residuals are Gaussian noise of the stated size, and the three blunders stand out", () => {
    const start = startingValues(declarations(all), readings(all));
    // The truth has no orientations: take each from its set, as the mean over its sights, good to a tenth of one sight's noise.
    const exact = declarations(all).map((state) =>
      truth.positions[state.name] ? { ...state, value: Float64Array.from(truth.positions[state.name]!) } : state,
    );
    const oriented = startingValues(
      exact,
      readings(all).filter(({ name }) => !truth.blunders.some(({ reading }) => reading === name)),
    );
    expect(start.missing).toEqual([]);
    const residuals = standardized(all, (name) => oriented.values.get(name)!);
    const spoiled = new Set(truth.blunders.map(({ reading }) => reading));
    const clean = [...residuals].filter(([name]) => !spoiled.has(name)).flatMap(([, numbers]) => numbers);
    const mean = clean.reduce((sum, number) => sum + number, 0) / clean.length;
    const square = clean.reduce((sum, number) => sum + number * number, 0) / clean.length;
    // Five standard deviations of the mean and of the mean square of n standard normal numbers (χ²: variance 2/n).
    expect(Math.abs(mean)).toBeLessThan(5 / Math.sqrt(clean.length));
    expect(Math.abs(square - 1)).toBeLessThan(5 * Math.sqrt(2 / clean.length));
    // Of 12 000 normal numbers one passes 5.5 with probability 5e-4.
    expect(Math.max(...clean.map(Math.abs))).toBeLessThan(5.5);
    for (const name of spoiled) expect(Math.abs(residuals.get(name)![0]!)).toBeGreaterThan(12);
  });

  test("starting values follow from the readings alone, near enough for an adjustment", () => {
    const { values } = startingValues(declarations(all), readings(all));
    for (const [name, position] of Object.entries(truth.positions)) {
      const { value } = values.get(name)!;
      // Pillars are read off a plan to half a metre; what hangs on them inherits that, turned and all.
      expect(Math.hypot(...position.map((number, k) => number - value[k]!)), name).toBeLessThan(5);
    }
  });

  test("the log is read without a complaint, entry by entry as it was made, and its lines fit the schema", async () => {
    const reader = new LogReader(lines(all), { keepGoing: true });
    let count = 0;
    for await (const { line, ...entry } of reader) {
      const made = all[count++]!;
      expect([line, entry.type]).toEqual([count, made.type]);
      if (entry.type === "reading")
        expect({ ...entry, value: 0, standardDeviations: 0 }).toEqual({ ...made, value: 0, standardDeviations: 0 });
    }
    expect(reader.problems).toEqual([]);
    expect(count).toBe(all.length);
    const validate = new Ajv.default({ strict: false }).compile(schema);
    let number = 0;
    for (const line of lines(all)) if (number++ % 37 === 0) expect(validate(JSON.parse(line)), line).toBe(true);
  });

  test("the seed decides", () => {
    const text = (seed?: number) => [...lines(quayMonitoring(seed === undefined ? {} : { seed }).entries)].join("");
    expect(text()).toBe(text(truth.seed));
    expect(text(7)).not.toBe(text());
  });

  test("more rounds make a log of over 100 000 readings", () => {
    let count = 0;
    for (const entry of quayMonitoring({ rounds: 9 }).entries) if (entry.type === "reading") count++;
    expect(count).toBeGreaterThan(100_000);
  });
});

describe("the patrol over the container yard", () => {
  const { entries, truth } = yardPatrol();
  const all = [...entries];

  test("poses, lamp posts and places met again", () => {
    const kinds = declarations(all).map(({ kind }) => kind);
    expect(kinds.filter((kind) => kind === "planar-pose").length).toBeGreaterThan(1000);
    expect(truth.revisits.length).toBeGreaterThan(100);
    const names = new Set(readings(all).map(({ name }) => name));
    for (const name of truth.revisits) expect(names.has(name)).toBe(true);
  });

  test("at the truth the residuals are Gaussian noise of the stated size", () => {
    const at = (name: string) => stateAt(name, truth.values[name]!, name.startsWith("x") ? "planar-pose" : "point-2d");
    const residuals = [...standardized(all, at).values()].flat();
    const square = residuals.reduce((sum, number) => sum + number * number, 0) / residuals.length;
    expect(Math.abs(square - 1)).toBeLessThan(5 * Math.sqrt(2 / residuals.length));
    expect(Math.max(...residuals.map(Math.abs))).toBeLessThan(5.5);
  });

  test("every pose and lamp post gets a starting value, and the log is read without a complaint", async () => {
    expect(startingValues(declarations(all), readings(all)).missing).toEqual([]);
    const reader = new LogReader(lines(all), { keepGoing: true });
    let count = 0;
    for await (const _entry of reader) count++;
    expect([count, reader.problems]).toEqual([all.length, []]);
  });
});
