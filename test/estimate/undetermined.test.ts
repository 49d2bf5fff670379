import { beforeAll, describe, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import type { Stream } from "../../bench/families/stream.js";
import { type CheckedMeasurement, type MeasurementInput, whiten } from "../../src/estimate/rows.js";
import { findUndetermined, type StateFacts } from "../../src/estimate/undetermined.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

/** A network under way: points by name, and what has been measured. */
class Net {
  readonly states: StateFacts[] = [];
  readonly rows: CheckedMeasurement[] = [];
  add(dimension: number, name?: string): number {
    const id = this.states.length;
    this.states.push({ id, dimension, name });
    return id;
  }
  measure(input: MeasurementInput): void {
    this.rows.push(whiten(input, (state) => this.states[state]?.dimension));
  }
  /** All unknowns of a state, known to `deviation`. */
  fix(state: number, deviation = 1): void {
    const d = this.states[state]!.dimension;
    const jacobian = Array.from({ length: d }, (_, i) => Array.from({ length: d }, (__, j) => (i === j ? 1 : 0)));
    this.measure({
      states: [state],
      jacobians: [jacobian],
      residual: new Float64Array(d),
      standardDeviations: new Float64Array(d).fill(deviation),
    });
  }
  level(from: number, to: number, deviation = 1e-3): void {
    this.measure({ states: [from, to], jacobians: [[[-1]], [[1]]], residual: [0], standardDeviations: [deviation] });
  }
  /** The distance of two points of the plane; its derivative is the unit vector between them. */
  distance([a, p]: Placed, [b, q]: Placed): void {
    const length = Math.hypot(q[0] - p[0], q[1] - p[1]);
    const unit = [(q[0] - p[0]) / length, (q[1] - p[1]) / length];
    this.measure({ states: [a, b], jacobians: [[unit.map((v) => -v)], [unit]], residual: [0], standardDeviations: [0.002] });
  }
  /** The azimuth of one point seen from another: a right angle to the line, over its length. */
  azimuth([a, p]: Placed, [b, q]: Placed): void {
    const [dx, dy] = [q[0] - p[0], q[1] - p[1]];
    const square = dx * dx + dy * dy;
    const far = [dy / square, -dx / square];
    this.measure({ states: [a, b], jacobians: [[far.map((v) => -v)], [far]], residual: [0], standardDeviations: [1e-4] });
  }
  find() {
    return findUndetermined(this.states, this.rows);
  }
}
type Placed = readonly [state: number, place: readonly [number, number]];

function netOf(stream: Stream, skip: (states: readonly number[], k: number) => boolean = () => false): Net {
  const net = new Net();
  for (let s = 0; s < stream.states; s += 1) net.add(stream.dimension(s));
  for (let k = 0; k < stream.measurements; k += 1) {
    const measurement = stream.measurement(k);
    if (!skip(measurement.states, k)) net.measure(measurement);
  }
  return net;
}

const plain = (net: Net) => net.find()?.motions.map(({ kind, states, direction, count }) => ({ kind, states, direction, count }));
const all = (net: Net): number[] => net.states.map(({ id }) => id);

describe("undetermined states are named, with their motion and what would hold them", () => {
  test("a levelling net without a height shifts as a whole; one height holds it", () => {
    const net = new Net();
    for (const name of ["quay", "gate", "mast", "slip"]) net.add(1, name);
    for (const [a, b] of [
      [0, 1],
      [1, 2],
      [2, 3],
      [3, 0],
      [0, 2],
    ] as const)
      net.level(a, b, 1e-3 * (1 + a));
    expect(plain(net)).toEqual([{ kind: "shift", states: [0, 1, 2, 3], direction: [1], count: undefined }]);
    const { names, because, remedy } = net.find()!;
    expect(names).toEqual(["quay", "gate", "mast", "slip"]);
    expect(because).toBe(
      "4 states are not determined by the measurements. quay, gate, mast and slip can shift together along unknown 0: no measurement ties " +
        `them to anything fixed. To mend it: ${remedy}.`,
    );
    expect(remedy).toBe("add a prior or a fix on one of them (quay, say), or a tie to a state that is fixed");
    net.fix(2);
    expect(net.find()).toBeUndefined();
  });

  test("weights four powers of ten apart, and a state that is read a million times more weakly than its neighbours, still shift together", () => {
    const net = new Net();
    for (let k = 0; k < 6; k += 1) net.add(1);
    for (let k = 0; k + 1 < 6; k += 1) net.level(k, k + 1, k === 4 ? 1e2 : 1e-4);
    expect(plain(net)).toEqual([{ kind: "shift", states: [0, 1, 2, 3, 4, 5], direction: [1], count: undefined }]);
  });

  const corners: Placed[] = [
    [0, [0, 0]],
    [1, [40, 3]],
    [2, [37, 29]],
    [3, [-2, 33]],
  ];
  const pairs = [
    [0, 1],
    [1, 2],
    [2, 3],
    [3, 0],
    [0, 2],
    [1, 3],
  ] as const;
  const points = (): Net => {
    const net = new Net();
    for (const [k] of corners) net.add(2, `P${k}`);
    return net;
  };

  test("a net of distances alone has two shifts and a turn; one fixed point leaves the turn, a second one nothing", () => {
    const net = points();
    for (const [a, b] of pairs) net.distance(corners[a]!, corners[b]!);
    expect(plain(net)).toEqual([
      { kind: "shift", states: all(net), direction: [1, 0], count: undefined },
      { kind: "shift", states: all(net), direction: [0, 1], count: undefined },
      { kind: "turn", states: all(net), direction: undefined, count: undefined },
    ]);
    net.fix(0, 0.01);
    expect(net.find()!.states).toEqual([1, 2, 3]);
    expect(net.find()!.motions).toHaveLength(1);
    net.fix(2, 0.01);
    expect(net.find()).toBeUndefined();
  });

  test("a net of azimuths alone has two shifts and one motion that is not called a turn (its scale is open)", () => {
    const net = points();
    for (const [a, b] of pairs) net.azimuth(corners[a]!, corners[b]!);
    expect(plain(net)!.map(({ kind, count }) => [kind, count])).toEqual([
      ["shift", undefined],
      ["shift", undefined],
      ["free", 1],
    ]);
    net.distance(corners[0]!, corners[1]!);
    expect(plain(net)!.map(({ kind }) => kind)).toEqual(["shift", "shift"]);
  });

  test("four points in a ring of distances have a fourth motion, so none of the rest is called a turn", () => {
    const net = points();
    for (const [a, b] of pairs.slice(0, 4)) net.distance(corners[a]!, corners[b]!);
    expect(plain(net)!.map(({ kind, count }) => [kind, count])).toEqual([
      ["shift", undefined],
      ["shift", undefined],
      ["free", 2],
    ]);
  });

  test("a point that one distance holds among fixed ones moves across the line", () => {
    const net = points();
    for (const [k] of corners.slice(0, 3)) net.fix(k, 0.01);
    net.distance(corners[0]!, [3, [30, 40]]);
    const [motion, ...others] = net.find()!.motions;
    expect(others).toEqual([]);
    expect(motion).toMatchObject({ kind: "shift", states: [3] });
    // The line has direction (0.6, 0.8).
    for (const [u, value] of [0.8, -0.6].entries()) expect(Math.abs(motion!.direction![u]! - value)).toBeLessThan(1e-12);
    expect(net.find()!.because).toContain("P3 can shift along (0.8, -0.6): what ties it to the other states leaves a common step open");
  });

  test("planar poses without a prior shift and turn as a whole; held at one place, they turn", () => {
    const net = netOf(chain(50, { fixEvery: 0 }), (_, k) => k === 0);
    expect(plain(net)).toEqual([
      { kind: "shift", states: all(net), direction: [1, 0, 0], count: undefined },
      { kind: "shift", states: all(net), direction: [0, 1, 0], count: undefined },
      { kind: "turn", states: all(net), direction: undefined, count: undefined },
    ]);
    net.measure({
      states: [20],
      jacobians: [
        [
          [1, 0, 0],
          [0, 1, 0],
        ],
      ],
      residual: [0, 0],
      standardDeviations: [1, 1],
    });
    expect(plain(net)).toEqual([{ kind: "turn", states: all(net), direction: undefined, count: undefined }]);
    net.measure({ states: [0], jacobians: [[[0, 0, 1]]], residual: [0], standardDeviations: [0.01] });
    expect(net.find()).toBeUndefined();
  });

  test("a state that nothing reads, and a part that nothing ties to the fixed one, are told apart from the rest", () => {
    const net = new Net();
    for (const name of ["a", "b", "c", "d", "e"]) net.add(1, name);
    net.fix(0);
    net.level(0, 1);
    net.level(3, 4);
    expect(plain(net)).toEqual([
      { kind: "free", states: [2], direction: undefined, count: 1 },
      { kind: "shift", states: [3, 4], direction: [1], count: undefined },
    ]);
    expect(net.find()!.remedy).toBe(
      "add a measurement that reads c, or a prior on it; add a prior or a fix on one of them (d, say), or a tie to a state that is fixed",
    );
  });

  test("a withdrawal that frees the far end of a patrol: the states beyond the cut, no others", () => {
    const stream = chain(60, { fixEvery: 0 });
    expect(netOf(stream).find()).toBeUndefined();
    const net = netOf(stream, (states) => states[0] === 39 && states[1] === 40);
    expect(net.find()!.states).toEqual(all(net).slice(40));
    expect(net.find()!.motions.map(({ kind }) => kind)).toEqual(["shift", "shift", "turn"]);
  });

  test("a prior that is lost beside the other measurements is told as such", () => {
    const net = new Net();
    for (let k = 0; k < 4; k += 1) net.add(1);
    for (let k = 0; k < 3; k += 1) net.level(k, k + 1, 1e-6);
    net.fix(0, 10);
    expect(net.find()!.because).toContain("held so weakly");
    expect(plain(net)).toMatchObject([{ states: [0, 1, 2, 3] }]);
  });

  test("10 000 poses without a prior, and more than ten motions in one part", () => {
    const net = netOf(chain(10_000, { fixEvery: 0 }), (_, k) => k === 0);
    const found = net.find()!;
    expect(found.states).toHaveLength(10_000);
    expect(found.motions.map(({ kind }) => kind)).toEqual(["shift", "shift", "turn"]);
    expect(found.because).toContain("state 0, state 1, state 2, state 3, state 4 and 9995 more can shift together along unknown 0");

    const star = new Net();
    star.add(1, "hub");
    star.fix(0);
    for (let k = 1; k <= 30; k += 1) {
      star.add(2);
      star.measure({ states: [0, k], jacobians: [[[-1]], [[1, 0]]], residual: [0], standardDeviations: [1] });
    }
    const motions = star.find()!.motions;
    expect(motions).toHaveLength(30);
    for (const [k, motion] of motions.entries()) expect(motion).toMatchObject({ kind: "shift", states: [k + 1], direction: [0, 1] });
  });
});
