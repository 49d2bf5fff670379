// A climbing spiral of spatial poses × 6: each tied to the one before, and to the one a coil below where it recognizes it.
import { identity, relativeSpatialPose, type SpatialPose } from "./poses.js";
import { random } from "./random.js";
import { Stream } from "./stream.js";

export interface HelixOptions {
  readonly seed?: number;
  readonly posesPerCoil?: number;
  /** Share of poses tied to the coil below. */
  readonly ties?: number;
}

export function helix(poses: number, { seed = 1, posesPerCoil = 50, ties = 1 }: HelixOptions = {}): Stream {
  const r = random(seed);
  const stream = new Stream(random(seed + 1));
  const radius = 10;
  const at = (k: number): SpatialPose => {
    const angle = (2 * Math.PI * k) / posesPerCoil;
    const [c, s] = [Math.cos(angle), Math.sin(angle)];
    return { place: [radius * c, radius * s, (1.5 * k) / posesPerCoil], axes: [-s, -c, 0, c, -s, 0, 0, 0, 1] };
  };
  const step = [0.002, 0.002, 0.002, 0.02, 0.02, 0.02];
  for (let k = 0; k < poses; k += 1) {
    stream.addState(6);
    if (k === 0) stream.addMeasurement([0], [identity(6)], [0.001, 0.001, 0.001, 0.01, 0.01, 0.01]);
    else stream.addMeasurement([k - 1, k], relativeSpatialPose(at(k - 1), at(k)), step);
    const below = k - posesPerCoil;
    if (below >= 0 && r.uniform() < ties) stream.addMeasurement([below, k], relativeSpatialPose(at(below), at(k)), step);
    stream.endStep();
  }
  return stream;
}
