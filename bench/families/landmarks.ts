// Planar poses × 3 on the lanes of a yard that see landmarks × 2 around them.

import { planarOdometry, planarStart, route } from "./patrol.js";
import { identity, pointFromPose, relativePlanarPose } from "./poses.js";
import { random } from "./random.js";
import { Stream } from "./stream.js";

export interface LandmarkOptions {
  readonly seed?: number;
  /** Crossings along each side of the yard. */
  readonly side: number;
  /** How far a pose sees, in metres (lanes are 5 m apart). */
  readonly range?: number;
  /** Share of the landmarks in range that a pose picks up. */
  readonly seen?: number;
}

/** A landmark arrives as a state with the first pose that sees it. */
export function landmarks(poses: number, count: number, { seed = 1, side, range = 6, seen = 0.5 }: LandmarkOptions): Stream {
  const r = random(seed);
  const stream = new Stream(random(seed + 1));
  const places = route(poses, side, seed + 2);
  const extent = 5 * side;
  const points = Array.from({ length: count }, () => ({ x: extent * r.uniform() - 2.5, y: extent * r.uniform() - 2.5, state: -1 }));
  const cell = (x: number, y: number): string => `${Math.floor(x / range)} ${Math.floor(y / range)}`;
  const cells = new Map<string, typeof points>();
  for (const point of points) cells.set(cell(point.x, point.y), [...(cells.get(cell(point.x, point.y)) ?? []), point]);

  let before = -1;
  for (const [k, pose] of places.entries()) {
    const state = stream.addState(3);
    if (k === 0) stream.addMeasurement([state], [identity(3)], planarStart);
    else stream.addMeasurement([before, state], relativePlanarPose(places[k - 1]!, pose), planarOdometry);
    before = state;
    for (const dx of [-range, 0, range]) {
      for (const dy of [-range, 0, range]) {
        for (const point of cells.get(cell(pose.x + dx, pose.y + dy)) ?? []) {
          if (Math.hypot(point.x - pose.x, point.y - pose.y) > range || r.uniform() >= seen) continue;
          if (point.state < 0) point.state = stream.addState(2);
          stream.addMeasurement([state, point.state], pointFromPose(pose, point), [0.03, 0.03]);
        }
      }
    }
    stream.endStep();
  }
  return stream;
}
