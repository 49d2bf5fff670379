// Planar poses × 3 in one line, each tied to the one before by odometry, with a position fix now and then.

import { planarOdometry, planarStart } from "./patrol.js";
import { identity, relativePlanarPose } from "./poses.js";
import { random } from "./random.js";
import { Stream } from "./stream.js";

export interface ChainOptions {
  readonly seed?: number;
  /** Steps from one fix to the next; 0: the first pose's prior alone holds the chain, and its condition grows with the cube of its length. */
  readonly fixEvery?: number;
}

export function chain(poses: number, { seed = 1, fixEvery = 50 }: ChainOptions = {}): Stream {
  const r = random(seed);
  const stream = new Stream(random(seed + 1));
  let before = { x: 0, y: 0, heading: 0 };
  for (let k = 0; k < poses; k += 1) {
    const heading = before.heading + 0.1 * r.normal();
    const pose = { x: before.x + Math.cos(before.heading), y: before.y + Math.sin(before.heading), heading };
    stream.addState(3);
    if (k > 0) stream.addMeasurement([k - 1, k], relativePlanarPose(before, pose), planarOdometry);
    if (k === 0 || (fixEvery > 0 && k % fixEvery === 0)) stream.addMeasurement([k], [identity(3)], planarStart);
    stream.endStep();
    before = pose;
  }
  return stream;
}
