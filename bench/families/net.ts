// A monitoring network: points × 2 on a jittered lattice, range and direction readings between neighbours in the plane, a few points tied down.
import { identity } from "./poses.js";
import { random } from "./random.js";
import { Stream } from "./stream.js";

export interface NetOptions {
  readonly seed?: number;
  /** Share of neighbour pairs read beyond those that hold the points together. */
  readonly checks?: number;
}

/** Readings arrive in random order, each tied to a point already there: it brings its other point along, or checks two known ones.
 *  One reading a step. */
export function net(points: number, { seed = 1, checks = 0.44 }: NetOptions = {}): Stream {
  const r = random(seed);
  const stream = new Stream(random(seed + 1));
  const side = Math.ceil(Math.sqrt(points));
  const spacing = 20;
  const place = Array.from({ length: points }, (_, k) => ({
    x: spacing * ((k % side) + 0.5 * (r.uniform() - 0.5)),
    y: spacing * (Math.floor(k / side) + 0.5 * (r.uniform() - 0.5)),
  }));
  const pairs: [number, number][] = [];
  for (let k = 0; k < points; k += 1) {
    const near = [k % side < side - 1 ? k + 1 : points, k + side, k % side < side - 1 ? k + side + 1 : points];
    for (const other of near) if (other < points) pairs.push([k, other]);
  }
  // A random spanning tree holds the points together; then a share of the other neighbour pairs is read as well.
  const root = Int32Array.from({ length: points }, (_, k) => k);
  const find = (k: number): number => {
    while (root[k] !== k) {
      root[k] = root[root[k]!]!;
      k = root[k]!;
    }
    return k;
  };
  for (let k = pairs.length - 1; k > 0; k -= 1) {
    const other = r.below(k + 1);
    [pairs[k], pairs[other]] = [pairs[other]!, pairs[k]!];
  }
  const readings = pairs.filter(([a, b]) => {
    const [ofA, ofB] = [find(a), find(b)];
    root[ofA] = ofB;
    return ofA !== ofB || r.uniform() < checks;
  });
  const touching: number[][] = Array.from({ length: points }, () => []);
  for (const [k, pair] of readings.entries()) for (const point of pair) touching[point]!.push(k);

  const state = new Int32Array(points).fill(-1);
  const queued = new Uint8Array(readings.length);
  const waiting: number[] = [];
  const everyFixed = Math.max(1, Math.floor(points / Math.max(3, Math.round(points / 300))));
  const arrive = (point: number): void => {
    state[point] = stream.addState(2);
    if (state[point] % everyFixed === 0) stream.addMeasurement([state[point]], [identity(2)], [0.01, 0.01]);
    for (const reading of touching[point]!) {
      if (!queued[reading]) waiting.push(reading);
      queued[reading] = 1;
    }
  };
  arrive(Math.min(points - 1, Math.floor((side * side + side) / 2)));
  stream.endStep();
  while (waiting.length > 0) {
    const pick = r.below(waiting.length);
    const [a, b] = readings[waiting[pick]!]!;
    waiting[pick] = waiting[waiting.length - 1]!;
    waiting.pop();
    if (state[a]! < 0) arrive(a);
    if (state[b]! < 0) arrive(b);
    const [dx, dy] = [place[b]!.x - place[a]!.x, place[b]!.y - place[a]!.y];
    const distance = Math.hypot(dx, dy);
    const [c, s] = [dx / distance, dy / distance];
    // Distance in metres, direction in radians: their derivatives with respect to the far point; the near one's are opposite.
    const far = [c, s, -s / distance, c / distance];
    stream.addMeasurement([state[a]!, state[b]!], [far.map((v) => -v), far], [0.002, 1e-4]);
    stream.endStep();
  }
  return stream;
}
