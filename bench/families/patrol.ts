// A vehicle on the lanes of a yard: planar poses × 3 tied by odometry; where it passes a spot again it may recognize it.
import { identity, type PlanarPose, relativePlanarPose, relativeSpatialPose, type SpatialPose } from "./poses.js";
import { random } from "./random.js";
import { Stream } from "./stream.js";

export interface PatrolOptions {
  readonly seed?: number;
  /** Crossings along each side of the square yard. */
  readonly side: number;
  /** Share of steps that tie the new pose to an earlier one at the same crossing. */
  readonly revisits: number;
  /** Share of crossings, of those that allow it, passed straight on before chance picks a way; 2/3 unless told. */
  readonly straightOn?: number;
  /** Unknowns of a pose: 3 in the plane, 6 in space. */
  readonly dimension?: 3 | 6;
  /** The first pose's prior: a multiple of its standard deviations of 10 mm and 2 mrad. */
  readonly priorScale?: number;
}

/** How often a route that can go straight on does. */
const USUALLY = 2 / 3;

/** The route: at each crossing straight on so often, else either way or straight at random, never back; the border turns it inward. */
export function route(steps: number, side: number, seed: number, straightOn: number = USUALLY): PlanarPose[] {
  const r = random(seed);
  const lane = 5;
  let [x, y, direction] = [side >> 1, side >> 1, 0];
  const poses: PlanarPose[] = [];
  for (let k = 0; k < steps; k += 1) {
    poses.push({ x: lane * x, y: lane * y, heading: (direction * Math.PI) / 2 });
    const open = [0, 1, 3]
      .map((turn) => (direction + turn) & 3)
      .filter((d) => {
        const [nx, ny] = ahead(x, y, d);
        return nx >= 0 && ny >= 0 && nx < side && ny < side;
      });
    const straight = open.includes(direction) && r.uniform() < straightOn;
    direction = straight ? direction : open[r.below(open.length)]!;
    [x, y] = ahead(x, y, direction);
  }
  return poses;
}

const ahead = (x: number, y: number, direction: number): [number, number] => [x + [1, 0, -1, 0][direction]!, y + [0, 1, 0, -1][direction]!];

/** Standard deviations of shift and turn, in metres and radians. */
const odometry = { shift: 0.02, turn: 0.005 };
const recognition = { shift: 0.05, turn: 0.01 };
const start = { shift: 0.01, turn: 0.002 };
type Deviations = typeof odometry;

/** In the order of the rows that the pose measurements have. */
const planar = ({ shift, turn }: Deviations): number[] => [shift, shift, turn];
const spatial = ({ shift, turn }: Deviations): number[] => [turn, turn, turn, shift, shift, shift];
const inSpace = ({ x, y, heading }: PlanarPose): SpatialPose => {
  const [c, s] = [Math.cos(heading), Math.sin(heading)];
  return { place: [x, y, 0], axes: [c, -s, 0, s, c, 0, 0, 0, 1] };
};

export const planarOdometry: readonly number[] = planar(odometry);
export const planarStart: readonly number[] = planar(start);

export function patrol(
  poses: number,
  { seed = 1, side, revisits, straightOn = USUALLY, dimension = 3, priorScale = 1 }: PatrolOptions,
): Stream {
  const r = random(seed);
  const stream = new Stream(random(seed + 1));
  const places = route(poses, side, seed + 2, straightOn);
  const deviations = dimension === 3 ? planar : spatial;
  const relative = (a: PlanarPose, b: PlanarPose): [number[], number[]] =>
    dimension === 3 ? relativePlanarPose(a, b) : relativeSpatialPose(inSpace(a), inSpace(b));
  const latest = new Map<string, number>();
  let due = 0;
  for (const [k, pose] of places.entries()) {
    stream.addState(dimension);
    if (k === 0)
      stream.addMeasurement(
        [0],
        [identity(dimension)],
        deviations(start).map((v) => priorScale * v),
      );
    else stream.addMeasurement([k - 1, k], relative(places[k - 1]!, pose), deviations(odometry));
    const spot = `${pose.x} ${pose.y}`;
    const before = latest.get(spot);
    due += revisits;
    if (before !== undefined && r.uniform() < due) {
      stream.addMeasurement([before, k], relative(places[before]!, pose), deviations(recognition));
      due -= 1;
    }
    latest.set(spot, k);
    stream.endStep();
  }
  return stream;
}
