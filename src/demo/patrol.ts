// A yard vehicle on patrol over the container blocks of Kestermouth: planar poses along the lanes, steps between them, lamp posts sighted
// on the way, and places met again on later rounds.
import type { LogEntry } from "../log/entries.js";
import { wrapAngle } from "../model/quantities.js";
import { type StateAt, stateKinds } from "../model/states.js";
import { random } from "../support/random.js";
import { simulateReading } from "./simulate.js";

export interface PatrolOptions {
  /** Default 2207. */
  readonly seed?: number;
  /** Rounds over the whole yard. Default 3: about 1 600 poses. */
  readonly rounds?: number;
}

export interface PatrolTruth {
  readonly seed: number;
  /** True values by state name: x, y of a lamp post; x, y, heading of a pose. */
  readonly values: Readonly<Record<string, readonly number[]>>;
  /** Names of the readings that say "this is where I was then". */
  readonly revisits: readonly string[];
}

/** The yard: five rows of blocks between six lanes, cross lanes at both ends; a lamp post at the middle of every block. */
const lanes = 6;
const laneSpacing = 28;
const laneLength = 240;
const blocksPerRow = 5;
const stride = 3.5; // metres from pose to pose
const start = Date.parse("2031-05-12T20:00:00Z");

const deviations = {
  step: [0.02, 0.01, 0.002],
  lamp: [0.05, 0.004],
  revisit: [0.04, 0.04, 0.005],
  first: [0.01, 0.01, 0.001],
  survey: [0.02, 0.02],
};
const lampReach = 22;
/** A place counts as met again within this distance, when the first visit lies this many poses back, and then this often. */
const revisit = { reach: 1.2, gap: 60, share: 0.25 };

type Pose = [x: number, y: number, heading: number];

/** The course of one round: up one lane, down the next, and back along the last cross lane. */
function* course(): Generator<Pose> {
  const corners: [number, number][] = [];
  for (let lane = 0; lane < lanes; lane++) {
    const x = lane * laneSpacing;
    corners.push(
      ...((lane % 2 === 0
        ? [
            [x, 0],
            [x, laneLength],
          ]
        : [
            [x, laneLength],
            [x, 0],
          ]) as [number, number][]),
    );
  }
  corners.push([0, 0]);
  for (const [k, [x, y]] of corners.slice(1).entries()) {
    const [x0, y0] = corners[k]!;
    const length = Math.hypot(x - x0, y - y0);
    const heading = Math.atan2(y - y0, x - x0);
    for (let done = 0; done < length; done += stride) yield [x0 + ((x - x0) * done) / length, y0 + ((y - y0) * done) / length, heading];
  }
}

const lampPosts: readonly { name: string; at: [number, number] }[] = Array.from({ length: lanes - 1 }, (_, row) =>
  Array.from({ length: blocksPerRow }, (_, block) => ({
    name: `L${row + 1}.${block + 1}`,
    at: [(row + 0.5) * laneSpacing, ((block + 0.5) * laneLength) / blocksPerRow] as [number, number],
  })),
).flat();

/** The log of the patrol and the truth beside it. The same options give the same log. */
export function yardPatrol(options: PatrolOptions = {}): { entries: Iterable<LogEntry>; truth: PatrolTruth } {
  const { seed = 2207, rounds = 3 } = options;
  const noise = random(seed);
  // The driver keeps a lane to a few decimetres.
  const poses = Array.from({ length: rounds }, () => [...course()]).flat();
  const driven = poses.map(([x, y, heading], k): StateAt => {
    const wander = [0.15, 0.15, 0.03].map((size) => size * noise.normal());
    const value = Float64Array.of(x + wander[0]!, y + wander[1]!, wrapAngle(heading + wander[2]!));
    return { name: `x${k}`, kind: stateKinds["planar-pose"], value };
  });
  const lamps = lampPosts.map(({ name, at }): StateAt => ({ name, kind: stateKinds["point-2d"], value: Float64Array.from(at) }));
  const revisits = findRevisits(driven, () => noise.uniform() < revisit.share);
  const truth: PatrolTruth = {
    seed,
    values: Object.fromEntries([...driven, ...lamps].map(({ name, value }) => [name, Array.from(value)])),
    revisits: [...revisits].map(([now, then]) => `again/x${now}/x${then}`),
  };
  return { entries: patrolLog(seed + 1, driven, lamps, revisits), truth };
}

/** For some poses, an earlier one at the same place: pose → the earlier pose. */
function findRevisits(poses: readonly StateAt[], noticed: () => boolean): Map<number, number> {
  const cell = (pose: StateAt, dx = 0, dy = 0) =>
    `${Math.floor(pose.value[0]! / revisit.reach) + dx} ${Math.floor(pose.value[1]! / revisit.reach) + dy}`;
  const visited = new Map<string, number[]>();
  const found = new Map<number, number>();
  for (const [k, pose] of poses.entries()) {
    const nearby = [-1, 0, 1].flatMap((dx) => [-1, 0, 1].flatMap((dy) => visited.get(cell(pose, dx, dy)) ?? []));
    const distance = (j: number) => Math.hypot(pose.value[0]! - poses[j]!.value[0]!, pose.value[1]! - poses[j]!.value[1]!);
    const then = nearby.filter((j) => k - j > revisit.gap && distance(j) <= revisit.reach).sort((a, b) => a - b)[0];
    if (then !== undefined && noticed()) found.set(k, then);
    visited.set(cell(pose), [...(visited.get(cell(pose)) ?? []), k]);
  }
  return found;
}

function* patrolLog(
  seed: number,
  poses: readonly StateAt[],
  lamps: readonly StateAt[],
  revisits: ReadonlyMap<number, number>,
): Generator<LogEntry> {
  const noise = random(seed);
  const time = (k: number) => new Date(start + 2000 * k).toISOString();
  yield {
    type: "header",
    title: "Kestermouth, container yard: night patrol",
    units: { length: "m", angle: "rad", time: "s" },
    deviationUnits: { length: "m", angle: "rad", time: "s" },
  };
  yield { type: "comment", text: "An invented port: no real place, no real vehicle. Headings run counter-clockwise from east." };
  for (const [k, lamp] of lamps.entries()) {
    yield { type: "state", name: lamp.name, kind: "point-2d", fixed: false };
    // Every fourth lamp post was surveyed when it was put up.
    if (k % 4 === 0) yield simulateReading("position", [lamp], deviations.survey, noise, { name: `survey/${lamp.name}`, time: time(0) });
  }
  for (const [k, pose] of poses.entries()) {
    yield { type: "state", name: pose.name, kind: "planar-pose", fixed: false };
    if (k === 0) yield simulateReading("pose", [pose], deviations.first, noise, { name: "gate", time: time(0) });
    else
      yield simulateReading("relative-pose", [poses[k - 1]!, pose], deviations.step, noise, { name: `step/${pose.name}`, time: time(k) });
    for (const lamp of lamps)
      if (k % 3 === 0 && Math.hypot(lamp.value[0]! - pose.value[0]!, lamp.value[1]! - pose.value[1]!) <= lampReach)
        yield simulateReading("range-bearing", [pose, lamp], deviations.lamp, noise, {
          name: `sees/${pose.name}/${lamp.name}`,
          time: time(k),
        });
    const then = revisits.get(k);
    if (then !== undefined)
      yield simulateReading("relative-pose", [poses[then]!, pose], deviations.revisit, noise, {
        name: `again/x${k}/x${then}`,
        time: time(k),
      });
  }
}
