import type { Quantity } from "../model/quantities.js";
import type { ReadingForm, ReadingKind } from "../model/reading-form.js";
import { findForm, type ReadingKindName, readingKinds } from "../model/reading-kinds.js";
import { type StateKindName, stateKinds } from "../model/states.js";
import type { LogEntry, NumberedEntry, ReadingEntry, StateEntry } from "./entries.js";
import * as fields from "./fields.js";
import { complain, type LineObject, oneOf, onlyFields, required, suggestion } from "./fields.js";
import { readHeader } from "./header.js";
import { lineFields, lineKind } from "./line-kinds.js";
import { ComplaintError, LogError, shown } from "./log-error.js";
import { siUnits, type Units, unitSize } from "./units.js";

const stateKindNames = Object.keys(stateKinds) as StateKindName[];
const readingKindNames = Object.keys(readingKinds) as ReadingKindName[];

interface KnownState {
  readonly kind: StateKindName;
  /** Named readings on it, so that they go when it is forgotten. */
  readonly readings: Set<string>;
}

/**
 * Turns the lines of a log into entries, in order. It keeps the units, the states that are not forgotten and the names of readings that can
 * be withdrawn: its memory follows the estimate, not the file. A line that is refused changes nothing.
 */
export class LogParser {
  #units: Units = siUnits;
  #deviationUnits: Units = siUnits;
  #started = false;
  #readings = 0;
  /** Names of states whose own line was refused. */
  readonly refusedStates: Set<string> = new Set();
  readonly #states = new Map<string, KnownState>();
  /** Named readings and their states. */
  readonly #named = new Map<string, readonly string[]>();

  /** The entry that a line holds, or `undefined` for a blank one. @throws {LogError} the line cannot be used. */
  parseLine(line: string, number: number): NumberedEntry | undefined {
    if (line.trim() === "") return undefined;
    let object: unknown;
    try {
      object = JSON.parse(line);
    } catch (error) {
      const comment = /^\s*(#|\/\/|--|;|%)/.test(line) ? 'Write a comment as {"comment": "…"}.' : "Each line holds one object in braces.";
      throw new LogError(number, {
        code: "LOG_NOT_JSON",
        value: line,
        problem: `${shown(line)} is not JSON (${(error as Error).message}).`,
        mend: comment,
      });
    }
    return this.parseObject(object, number);
  }

  /** The entry that a line's object stands for. @throws {LogError} it cannot be used. */
  parseObject(object: unknown, number: number): NumberedEntry {
    try {
      const entry = this.#entry(object);
      this.#remember(entry);
      return { ...entry, line: number };
    } catch (error) {
      if (!(error instanceof ComplaintError)) throw error;
      const { state } = (object ?? {}) as LineObject;
      if (typeof state === "string" && !this.#states.has(state)) this.refusedStates.add(state);
      throw new LogError(number, error.complaint);
    }
  }

  /** To be called after the last line. @throws {LogError} `LOG_EMPTY`: nothing was read. */
  end(): void {
    if (this.#readings > 0) return;
    const nothing = this.#started ? "it holds no readings." : "it is empty.";
    throw new LogError(0, {
      code: "LOG_EMPTY",
      problem: nothing,
      mend: "Check that this is the right file: a log has one JSON object a line.",
    });
  }

  #entry(object: unknown): LogEntry {
    if (typeof object !== "object" || object === null || Array.isArray(object))
      complain({
        code: "LOG_NOT_JSON",
        value: object,
        problem: `${shown(object)} is not an object.`,
        mend: "Each line holds one object in braces.",
      });
    const line = object as LineObject;
    const kind = lineKind(line);
    onlyFields(line, lineFields[kind], kind === "log" ? "the first line" : `a "${kind}" line`);
    if (line.comment !== undefined) fields.text("comment", line.comment);
    switch (kind) {
      case "log":
        return this.#header(line);
      case "state":
        return this.#state(line);
      case "reading":
        return this.#reading(line);
      case "withdraw":
        return this.#withdraw(line);
      case "forget":
        return this.#forget(line);
      case "comment":
        return { type: "comment", text: line.comment as string };
    }
  }

  #remember(entry: LogEntry): void {
    if (entry.type !== "comment") this.#started = true;
    switch (entry.type) {
      case "header":
        this.#units = entry.units;
        this.#deviationUnits = entry.deviationUnits;
        break;
      case "state":
        this.#states.set(entry.name, { kind: entry.kind, readings: new Set() });
        break;
      case "reading":
        this.#readings++;
        if (entry.name === undefined) break;
        this.#named.set(entry.name, entry.states);
        for (const state of entry.states) this.#states.get(state)!.readings.add(entry.name);
        break;
      case "withdraw":
        this.#dropReading(entry.reading);
        break;
      case "forget":
        for (const state of entry.states) {
          for (const reading of this.#states.get(state)!.readings) this.#dropReading(reading);
          this.#states.delete(state);
        }
    }
  }

  #dropReading(reading: string): void {
    for (const state of this.#named.get(reading)!) this.#states.get(state)?.readings.delete(reading);
    this.#named.delete(reading);
  }

  #header(line: LineObject): LogEntry {
    if (this.#started)
      complain({
        code: "LOG_LATE_HEADER",
        field: "log",
        value: line.log,
        problem: "it stands below the first line.",
        mend: "Move it to the top; units hold for the whole log.",
      });
    return readHeader(line);
  }

  #state(line: LineObject): StateEntry {
    const name = fields.name("state", line.state);
    if (this.#states.has(name))
      complain({
        code: "LOG_NAME_TAKEN",
        field: "state",
        value: name,
        problem: `there is a state "${name}" already.`,
        mend: "Give each state a name of its own.",
      });
    const kind = stateKinds[oneOf("kind", required(line, "kind", "the state"), stateKindNames, "kind of state", "LOG_UNKNOWN_KIND")];
    const fixed = line.fixed === undefined ? false : fields.truth("fixed", line.fixed);
    if (line.value === undefined) {
      if (fixed)
        complain({
          code: "LOG_MISSING_FIELD",
          field: "value",
          problem: "a fixed state lacks it.",
          mend: "Give the value at which it is held.",
        });
      return { type: "state", name, kind: kind.name, fixed };
    }
    const value = fields.numbers("value", line.value, kind.size, `A ${kind.name}`);
    if (kind.name === "spatial-pose") checkAttitude(line.value, value);
    return { type: "state", name, kind: kind.name, fixed, value: kind.normalize(this.#inSi(value, kind.quantities, this.#units)) };
  }

  #reading(line: LineObject): ReadingEntry {
    const kindName = oneOf("reading", line.reading, readingKindNames, "kind of reading", "LOG_UNKNOWN_KIND");
    const what = `a "${kindName}" reading`;
    const states = fields.names("states", required(line, "states", what));
    const form = this.#form(kindName, states);
    const value = fields.numbers("value", required(line, "value", what), form.quantities.length, `On ${states.join(", ")} ${what}`);
    const isSpatialPose = form.quantities === stateKinds["spatial-pose"].quantities;
    if (isSpatialPose) checkAttitude(line.value, value);
    const inSi = this.#inSi(value, form.quantities, this.#units);
    const name = line.name === undefined ? undefined : fields.name("name", line.name);
    if (name !== undefined && this.#named.has(name))
      complain({
        code: "LOG_NAME_TAKEN",
        field: "name",
        value: name,
        problem: `there is a reading "${name}" already.`,
        mend: "Give each named reading a name of its own, or none.",
      });
    return {
      type: "reading",
      kind: kindName,
      states,
      value: isSpatialPose ? stateKinds["spatial-pose"].normalize(inSi) : inSi,
      ...this.#noise(line, form, what),
      ...this.#setup(line, kindName),
      ...(name === undefined ? {} : { name }),
      ...(line.time === undefined ? {} : { time: fields.moment("time", line.time) }),
    };
  }

  #form(kindName: ReadingKindName, states: readonly string[]): ReadingForm {
    const kind: ReadingKind = readingKinds[kindName];
    const { roles } = kind;
    if (states.length !== roles.length)
      complain({
        code: "LOG_BAD_VALUE",
        field: "states",
        value: states,
        problem: `${shown(states)} has ${states.length} ${states.length === 1 ? "name" : "names"}.`,
        mend: `A "${kindName}" reading takes ${roles.length}: ${roles.join(", ")}.`,
      });
    const twice = states.find((state, k) => states.indexOf(state) < k);
    if (twice !== undefined)
      complain({
        code: "LOG_SAME_STATE_TWICE",
        field: "states",
        value: states,
        problem: `"${twice}" is both ${roles[states.indexOf(twice)]} and ${roles[states.lastIndexOf(twice)]}: nothing can sight itself.`,
        mend: "Name the other end.",
      });
    const kinds = states.map((state) => this.#known("states", state).kind);
    return (
      findForm(kind, kinds) ??
      complain({
        code: "LOG_KINDS_DO_NOT_FIT",
        field: "states",
        value: states,
        problem: `a "${kindName}" reading cannot join ${states.map((state, k) => `"${state}" (${kinds[k]})`).join(", ")}.`,
        mend: `It joins ${kind.forms.map((form) => roles.map((role, k) => `${role}: ${form.states[k]!.join(" or ")}`).join(", ")).join("; or ")}.`,
      })
    );
  }

  #known(field: string, state: string): KnownState {
    return (
      this.#states.get(state) ??
      complain({
        code: "LOG_UNKNOWN_STATE",
        field,
        value: state,
        problem: `no state "${state}" is declared above this line.`,
        mend: `${suggestion(state, this.#states.keys())}Declare a state before it is used.`,
      })
    );
  }

  #noise(line: LineObject, form: ReadingForm, what: string): Pick<ReadingEntry, "standardDeviations" | "covariance"> {
    const { rowQuantities } = form;
    const rows = rowQuantities.length;
    if ((line.standardDeviations === undefined) === (line.covariance === undefined))
      complain({
        code: "LOG_BAD_NOISE",
        field: "standardDeviations",
        value: line.standardDeviations,
        problem: line.covariance === undefined ? `${what} lacks it.` : `${what} has a covariance as well.`,
        mend: `Give either ${rows === 1 ? "a standard deviation" : `${rows} standard deviations`} or a covariance.`,
      });
    const sizes = rowQuantities.map((quantity) => unitSize(quantity, this.#deviationUnits));
    if (line.covariance !== undefined) {
      const covariance = fields.covariance("covariance", line.covariance, rows);
      return { covariance: covariance.map((entry, k) => entry * sizes[Math.floor(k / rows)]! * sizes[k % rows]!) };
    }
    const deviations = fields.numbers("standardDeviations", line.standardDeviations, rows, what);
    const bad = deviations.find((deviation) => deviation <= 0);
    if (bad !== undefined)
      complain({
        code: "LOG_BAD_NOISE",
        field: "standardDeviations",
        value: line.standardDeviations,
        problem: `${bad} is not a standard deviation.`,
        mend: 'It must be greater than zero; to hold a state at a value, declare it "fixed".',
      });
    return { standardDeviations: deviations.map((deviation, k) => deviation * sizes[k]!) };
  }

  #setup(line: LineObject, kind: ReadingKindName): Pick<ReadingEntry, "setup"> {
    const setup: { instrumentHeight?: number; targetHeight?: number } = {};
    for (const field of ["instrumentHeight", "targetHeight"] as const) {
      if (line[field] === undefined) continue;
      if (kind !== "slope-distance" && kind !== "zenith-angle")
        complain({
          code: "LOG_UNKNOWN_FIELD",
          field,
          value: line[field],
          problem: `it does not touch a "${kind}" reading.`,
          mend: "Leave it out; it belongs to slope-distance and zenith-angle.",
        });
      setup[field] = fields.finiteNumber(field, line[field]) * unitSize("length", this.#units);
    }
    return Object.keys(setup).length === 0 ? {} : { setup };
  }

  #withdraw(line: LineObject): LogEntry {
    const reading = fields.name("withdraw", line.withdraw);
    if (!this.#named.has(reading))
      complain({
        code: "LOG_UNKNOWN_READING",
        field: "withdraw",
        value: reading,
        problem: `no reading "${reading}" stands above this line.`,
        mend: `${suggestion(reading, this.#named.keys())}Only a reading with a name can be withdrawn, once, while its states are kept.`,
      });
    return { type: "withdraw", reading, ...(line.time === undefined ? {} : { time: fields.moment("time", line.time) }) };
  }

  #forget(line: LineObject): LogEntry {
    const states = fields.names("forget", line.forget);
    for (const [k, state] of states.entries()) {
      this.#known("forget", state);
      if (states.indexOf(state) < k)
        complain({
          code: "LOG_SAME_STATE_TWICE",
          field: "forget",
          value: states,
          problem: `"${state}" is named twice.`,
          mend: "Name each state once.",
        });
    }
    return { type: "forget", states, ...(line.time === undefined ? {} : { time: fields.moment("time", line.time) }) };
  }

  #inSi(value: Float64Array, quantities: readonly Quantity[], units: Units): Float64Array {
    return value.map((number, k) => number * unitSize(quantities[k]!, units));
  }
}

/** A quaternion written with four digits or more has length 1 within this. */
const attitudeTolerance = 1e-3;

function checkAttitude(written: unknown, value: Float64Array): void {
  const length = Math.hypot(...value.subarray(3));
  if (Math.abs(length - 1) <= attitudeTolerance) return;
  complain({
    code: "LOG_BAD_VALUE",
    field: "value",
    value: written,
    problem: `its last four numbers are a quaternion of length ${Number(length.toPrecision(6))}.`,
    mend: "Give x, y, z, then a unit quaternion w, x, y, z.",
  });
}
