import { beforeAll, describe, expect, test } from "vitest";
import type { Stream } from "../../bench/families/stream.js";
import { families } from "../../bench/families.js";
import { decodeSnapshot, encodeSnapshot } from "../../src/estimate/snapshot.js";
import {
  DisposedError,
  Estimate,
  type MeasurementId,
  memoryUsage,
  NotCommittedError,
  OptionError,
  SnapshotError,
  type StateId,
  UndeterminedError,
} from "../../src/index.js";
import { crc32 } from "../../src/support/crc32.js";
import { errorOf, initFacade } from "../support/facade.js";

beforeAll(initFacade);

test("CRC-32 of the nine digits is the published check value, of nothing it is zero", () => {
  // The check value of CRC-32 (ISO 3309, IEEE 802.3) in the published catalogues of such codes; from memory.
  expect(crc32(new TextEncoder().encode("123456789"))).toBe(0xcbf43926);
  expect(crc32(new Uint8Array(0))).toBe(0);
});

/** A stream being fed to an estimate. Its twins make the same changes at the same steps. */
class Feed {
  readonly stream: Stream;
  readonly estimate: Estimate;
  readonly #manner: "growing" | "changing";
  readonly #ids: StateId[] = [];
  /** Copies of measurements that come, are linearized anew and leave, by the step at which they came. */
  readonly #copies = new Map<number, MeasurementId>();
  /** States beside the stream's own that come and are forgotten, by the step at which they came. */
  readonly #visitors = new Map<number, StateId>();

  /** @param manner "growing": the stream alone; "changing": with copies and visitors. @param from goes on where that one is. */
  constructor(stream: Stream, estimate: Estimate, manner: "growing" | "changing", from?: Feed) {
    this.stream = stream;
    this.estimate = estimate;
    this.#manner = manner;
    if (!from) return;
    this.#ids.push(...from.#ids);
    for (const [step, id] of from.#copies) this.#copies.set(step, id);
    for (const [step, id] of from.#visitors) this.#visitors.set(step, id);
  }

  get newest(): StateId {
    return this.#ids.at(-1)!;
  }

  /** All that step `s` brings and takes, left pending. */
  begin(s: number): void {
    const { stream, estimate } = this;
    const { firstState, lastState, firstMeasurement, lastMeasurement } = stream.step(s);
    for (let i = firstState; i < lastState; i += 1) this.#ids.push(estimate.addState(stream.dimension(i)));
    for (let k = firstMeasurement; k < lastMeasurement; k += 1) estimate.addMeasurement(this.#input(k));
    if (this.#manner === "growing") return;
    if (s % 7 === 3) this.#copies.set(s, estimate.addMeasurement(this.#input(firstMeasurement - 1)));
    if (s < 40) return; // while nothing is removed, rows that go are simply dropped
    const older = this.#copies.get(s - 2);
    if (older !== undefined && s % 2 === 0) {
      const { jacobians, residual } = stream.measurement(stream.step(s - 2).firstMeasurement - 1);
      estimate.replace(older, { jacobians: jacobians.map((block) => block.map((v) => 1.01 * v)), residual });
    }
    const oldest = this.#copies.get(s - 4);
    if (oldest !== undefined && s % 2 === 0) estimate.withdraw(oldest);
    if (s % 11 === 5) this.#addVisitor(s);
    const visitor = this.#visitors.get(s - 3);
    if (visitor !== undefined) estimate.forget([visitor]);
  }

  /** Takes out, in a commit of its own, a copy that has been in force for one step: its rows are simply dropped. */
  end(s: number): void {
    const copy = this.#copies.get(s - 1);
    if (copy === undefined || s % 2 === 1) return;
    this.estimate.withdraw(copy);
    this.estimate.commit();
  }

  #addVisitor(s: number): void {
    const dimension = this.stream.dimension(this.#ids.length - 1);
    const one = new Float64Array(dimension * dimension);
    for (let j = 0; j < dimension; j += 1) one[j * (dimension + 1)] = 1;
    const visitor = this.estimate.addState(dimension, { name: `visitor ${s}` });
    this.#visitors.set(s, visitor);
    for (const state of this.#ids.slice(-2)) {
      if (this.stream.dimension(this.#ids.indexOf(state)) !== dimension) continue;
      const noise = new Float64Array(dimension).fill(0.2);
      this.estimate.addMeasurement({
        states: [state, visitor],
        jacobians: [one.map((v) => -v), one],
        residual: new Float64Array(dimension).fill(0.1),
        standardDeviations: noise,
      });
    }
  }

  #input(k: number) {
    const { states, jacobians, residual, standardDeviations } = this.stream.measurement(k);
    return { states: states.map((i) => this.#ids[i]!), jacobians, residual, standardDeviations };
  }
}

const sameBits = (a: Float64Array, b: Float64Array): boolean => a.length === b.length && a.every((value, k) => Object.is(value, b[k]));

/** Answers by every route. Asking is part of a history: it keeps the solution, and may bring in a new base. */
function answersOf({ estimate, newest }: Feed): Record<string, Float64Array> {
  return {
    oneSolution: estimate.solution(newest),
    solution: estimate.solution(),
    marginals: estimate.marginals(),
    column: estimate.blockColumn(newest),
    cross: estimate.crossCovariance(0, newest),
    residuals: estimate.residuals(),
  };
}

function expectSameAnswers(a: Record<string, Float64Array>, b: Record<string, Float64Array>): void {
  for (const [what, answer] of Object.entries(a)) expect([what, sameBits(answer, b[what]!)]).toEqual([what, true]);
}

const size = 120;

describe.each(["heavy", "net", "chain"] as const)(
  "a stream of the %s family, restored midway, answers and goes on with the same bits",
  (family) => {
    test.each([
      ["all", "changing"],
      ["all", "growing"],
      ["none", "changing"],
    ] as const)("track %s, %s", (track, manner) => {
      const used = memoryUsage().used;
      const stream = families[family].make(size);
      const original = new Feed(stream, new Estimate({ track }), manner);
      original.estimate.track(track, { column: "newest" });
      const twins: Feed[] = [];
      const routes = new Set<string>();
      const events = new Set<string>();
      let compared = 0;
      let owed = 0;
      const addTwin = (): void => {
        const bytes = original.estimate.snapshot();
        const { world, events: since, tracked } = decodeSnapshot(bytes).engine!;
        for (const { kind } of since) events.add(kind);
        const states = world.states.length + since.filter(({ kind }) => kind === "leaf").length;
        if (tracked.numbers && tracked.numbers.slots < states) owed += 1;
        twins.push(new Feed(stream, Estimate.restore(bytes), manner, original));
      };
      for (let s = 0; s < stream.steps; s += 1) {
        for (const each of [original, ...twins]) each.begin(s);
        if (s % 46 === 20) addTwin(); // everything is pending
        const report = original.estimate.commit();
        routes.add(report.route);
        for (const twin of twins) expect(twin.estimate.commit()).toEqual(report);
        for (const each of [original, ...twins]) each.end(s);
        if (s % 26 === 17) addTwin(); // at other distances from the last reading
        if (s % 4 !== 1) continue;
        const answers = answersOf(original);
        for (const twin of twins) {
          compared += 1;
          expectSameAnswers(answers, answersOf(twin));
          expect(twin.estimate.varianceFactor()).toEqual(original.estimate.varianceFactor());
          expect(twin.estimate.statistics).toEqual(original.estimate.statistics);
        }
      }
      expect(routes).toEqual(new Set(["rebase", "ledger"]));
      expect(compared).toBeGreaterThan(20);
      // What the snapshots held: every kind of event; and kept numbers that had yet to follow later states.
      if (track === "all" && manner === "changing") expect(events).toEqual(new Set(["leaf", "rows", "drop"]));
      if (manner === "growing") expect(owed).toBeGreaterThan(0);
      for (const each of [original, ...twins]) each.estimate.dispose();
      expect(memoryUsage().used).toBe(used);
    });
  },
);

/** A small estimate with something of everything in it. */
function small(): Feed {
  const stream = families.heavy.make(12);
  const feed = new Feed(stream, new Estimate({ track: "all", tolerance: Number.POSITIVE_INFINITY }), "changing");
  for (let s = 0; s < stream.steps - 1; s += 1) {
    feed.begin(s);
    feed.estimate.commit();
    if (s % 3 === 0) feed.estimate.marginals();
  }
  feed.begin(stream.steps - 1);
  return feed;
}

/** The bytes with one of them changed, and the checksum made to fit again. */
function forged(bytes: Uint8Array, at: number, value: number): Uint8Array {
  const copy = bytes.slice();
  copy[at] = value;
  new DataView(copy.buffer).setUint32(copy.length - 4, crc32(copy.subarray(0, -4)), true);
  return copy;
}

const problemOf = async (bytes: Uint8Array): Promise<string> => {
  const error = await errorOf(() => Estimate.restore(bytes));
  expect(error).toBeInstanceOf(SnapshotError);
  return (error as SnapshotError).problem;
};

describe("bytes that are no whole snapshot are refused, and nothing is held", () => {
  test("one byte changed, anywhere", async () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    const used = memoryUsage().used;
    for (let at = 0; at < bytes.length; at += at < 24 || at >= bytes.length - 4 ? 1 : 97) {
      const damaged = bytes.slice();
      damaged[at]! ^= 1 << (at % 8);
      const expected = at < 4 ? ["foreign"] : at >= 8 && at < 16 ? ["cut short", "damaged"] : ["damaged"];
      expect(expected).toContain(await problemOf(damaged));
    }
    expect(memoryUsage().used).toBe(used);
    estimate.dispose();
  });

  test("cut short, or with bytes behind", async () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    const used = memoryUsage().used;
    for (let length = 0; length < bytes.length; length += length < 40 ? 1 : 211)
      expect(await problemOf(bytes.subarray(0, length))).toBe("cut short");
    expect(await problemOf(bytes.subarray(0, -1))).toBe("cut short");
    const longer = new Uint8Array(bytes.length + 1);
    longer.set(bytes);
    expect(await problemOf(longer)).toBe("damaged");
    expect(memoryUsage().used).toBe(used);
    estimate.dispose();
  });

  test.each([1, 3])("format version %i, with a checksum that fits", async (version) => {
    const { estimate } = small();
    const bytes = forged(estimate.snapshot(), 4, version);
    expect(await problemOf(bytes)).toBe("another version");
    const error = (await errorOf(() => Estimate.restore(bytes))) as SnapshotError;
    expect(error.message).toContain(`at byte 4, the format version is ${version}, and this build reads 2`);
    expect(error.details).toMatchObject({ problem: "another version", byte: 4 });
    estimate.dispose();
  });

  test("a text or a pool that does not fit, with a checksum that does", async () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    expect(await problemOf(forged(bytes, 22, 1))).toBe("damaged"); // 2^48 bytes of text
    expect(await problemOf(forged(bytes, 16, bytes[16]! ^ 1))).toBe("damaged"); // not a multiple of 8
    expect(await problemOf(forged(bytes, 24, 0x21))).toBe("damaged"); // "!" for "{"
    const text = new TextDecoder("latin1").decode(bytes);
    const digit = text.indexOf("[", 24) + 1; // the first length
    expect(await problemOf(forged(bytes, digit, text.charCodeAt(digit) === 0x39 ? 0x38 : text.charCodeAt(digit) + 1))).toBe("damaged");
    const row = text.indexOf('"@rows":10', 24) + '"@rows":'.length;
    expect(await problemOf(forged(bytes, row, 0x2b))).toBe("damaged"); // "+0" is no JSON
    const noRow = bytes.slice();
    noRow[row] = 0x2d;
    expect(await problemOf(forged(noRow, row + 1, 0x31))).toBe("damaged"); // rows −1
    estimate.dispose();
  });

  test("numbers that are no longer definite, as another build's rounding may leave them", async () => {
    const { estimate } = small();
    const contents = decodeSnapshot(estimate.snapshot());
    const used = memoryUsage().used;
    for (const { blocks } of contents.engine!.world.rows) for (const block of blocks) block.fill(0);
    expect(await problemOf(encodeSnapshot(contents))).toBe("another build");
    expect(memoryUsage().used).toBe(used);
    estimate.dispose();
  });

  test("what is no Uint8Array, and unknown options", async () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    expect(await problemOf(bytes.buffer as unknown as Uint8Array)).toBe("foreign");
    expect(await errorOf(() => Estimate.restore(bytes, { tolerence: 1 } as object))).toBeInstanceOf(OptionError);
    expect(await errorOf(() => Estimate.restore(bytes, { tolerance: -1 }))).toBeInstanceOf(OptionError);
    estimate.dispose();
    expect(await errorOf(() => estimate.snapshot())).toBeInstanceOf(DisposedError);
  });
});

describe("restored estimates", () => {
  test("are independent of each other, of the original and of the bytes", () => {
    const original = small();
    const bytes = original.estimate.snapshot();
    const unaligned = new Uint8Array(bytes.length + 3).subarray(3);
    unaligned.set(bytes);
    const [first, second] = [Estimate.restore(bytes), Estimate.restore(unaligned)];
    unaligned.fill(0);
    first.commit();
    first.addMeasurement({ states: [0], jacobians: [new Float64Array([1, 0, 0])], residual: [0], standardDeviations: [1e-3] });
    first.commit();
    first.dispose();
    original.estimate.commit();
    second.commit();
    expectSameAnswers(answersOf(original), answersOf(new Feed(original.stream, second, "changing", original)));
    original.estimate.dispose();
    second.commit();
    expect(second.marginals().length).toBeGreaterThan(0);
    second.dispose();
  });

  test("give the same bytes again", () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    const restored = Estimate.restore(bytes);
    expect(restored.snapshot()).toEqual(bytes);
    restored.dispose();
    estimate.dispose();
  });

  test("keep options, names, and noise in its units; options given take their place", async () => {
    const estimate = new Estimate({
      track: "all",
      tolerance: Number.POSITIVE_INFINITY,
      onDoubt: "answer",
      latencyBudget: 1e6,
      route: "orthogonal",
    }); // never met
    const state = estimate.addState(2, { name: "Quay corner µ" });
    const one = [
      [1, 0],
      [0, 1],
    ];
    const measurement = estimate.addMeasurement({
      states: [state],
      jacobians: [one],
      residual: [-0, 2],
      covariance: [
        [4, 1],
        [1, 9],
      ],
      name: "fix",
    });
    const early = Estimate.restore(estimate.snapshot()); // nothing committed yet
    expect(await errorOf(() => early.marginal(state))).toBeInstanceOf(NotCommittedError);
    early.commit();
    estimate.commit();
    expect(sameBits(early.marginal(state), estimate.marginal(state))).toBe(true);
    early.replace(measurement, { jacobians: [one], residual: [1, 1] });
    estimate.replace(measurement, { jacobians: [one], residual: [1, 1] });
    const pending = Estimate.restore(estimate.snapshot(), { tolerance: 1e-3, latencyBudget: undefined });
    for (const each of [early, pending, estimate]) each.commit();
    expect(sameBits(early.solution(), estimate.solution())).toBe(true);
    expect(sameBits(pending.residuals(), estimate.residuals())).toBe(true);
    expect(decodeSnapshot(pending.snapshot()).options).toEqual({
      track: "all",
      tolerance: 1e-3,
      onDoubt: "answer",
      latencyBudget: 1e6,
      memoryLimit: Number.POSITIVE_INFINITY,
      route: "orthogonal",
    });
    expect(decodeSnapshot(estimate.snapshot()).options.tolerance).toBe(Number.POSITIVE_INFINITY);
    expect(decodeSnapshot(early.snapshot()).states[0]).toEqual({ dimension: 2, name: "Quay corner µ", standing: "committed" });
    for (const each of [early, pending, estimate]) each.dispose();
  });

  test("share what the original shares: rows with the base, noise with a later linearization", () => {
    const estimate = new Estimate();
    const state = estimate.addState(1);
    const measurement = estimate.addMeasurement({ states: [state], jacobians: [[[2]]], residual: [1], standardDeviations: [0.5] });
    estimate.commit();
    estimate.replace(measurement, { jacobians: [[[3]]], residual: [1] });
    const { measurements, replaced, engine } = decodeSnapshot(estimate.snapshot());
    expect(engine!.world.rows).toHaveLength(1);
    expect(engine!.world.rows[0]).toBe(measurements[0]!.rows);
    expect(replaced[0]![1].noise.root).toBe(measurements[0]!.rows.noise.root);
    estimate.dispose();
  });

  test("answer with the same bits after a refused commit", async () => {
    const original = small();
    original.estimate.commit();
    original.estimate.withdraw(0); // all that says where the patrol is
    expect(await errorOf(() => original.estimate.commit())).toBeInstanceOf(UndeterminedError);
    const twin = new Feed(original.stream, Estimate.restore(original.estimate.snapshot()), "changing", original);
    expect(await errorOf(() => twin.estimate.commit())).toBeInstanceOf(UndeterminedError); // still pending
    expectSameAnswers(answersOf(original), answersOf(twin));
    original.estimate.dispose();
    twin.estimate.dispose();
  });

  test("keep a tracked list, unless track is among the options", () => {
    const { estimate } = small();
    estimate.commit();
    estimate.track([2, 0]);
    const listed = Estimate.restore(estimate.snapshot());
    expect(sameBits(listed.marginals(), estimate.marginals())).toBe(true);
    const all = Estimate.restore(estimate.snapshot(), { track: "none" });
    expect(all.marginals().length).toBeGreaterThan(estimate.marginals().length);
    for (const each of [estimate, listed, all]) each.dispose();
  });

  test("leave memory flat after 1 000 lives", () => {
    const { estimate } = small();
    const bytes = estimate.snapshot();
    Estimate.restore(bytes).dispose();
    const { used, capacity } = memoryUsage();
    for (let life = 0; life < 1000; life += 1) Estimate.restore(bytes).dispose();
    expect(memoryUsage()).toMatchObject({ used, capacity });
    estimate.dispose();
  });
});
