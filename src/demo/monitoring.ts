// The monitoring of Lantern Quay, Kestermouth: 240 marks, 8 pillars, 60 days in six epochs, a settlement at the bollard of bay 11 from the
// fourth epoch on, three blunders. The marks of an epoch are states of their own ("B11.0@4"): a movement is what two of them differ by.
import type { LogEntry, ReadingEntry } from "../log/entries.js";
import { type StateAt, stateKinds } from "../model/states.js";
import { random } from "../support/random.js";
import { type Mark, marks, type Place, planDistance, references, seaward, stations } from "./port.js";
import { simulateReading } from "./simulate.js";

export interface MonitoringOptions {
  /** Default 1031. */
  readonly seed?: number;
  /** How often each sight of each visit is repeated. Default 1: about 14 000 readings; 8 make a log of over 100 000. */
  readonly rounds?: number;
}

export interface MonitoringTruth {
  readonly seed: number;
  readonly epochs: number;
  /** True positions by state name. */
  readonly positions: Readonly<Record<string, readonly number[]>>;
  readonly settlement: {
    readonly bollard: string;
    /** The first epoch that sees it. */
    readonly fromEpoch: number;
    /** Marks that move by a millimetre or more, the most moved first; metres, by the last epoch. */
    readonly moved: readonly { readonly mark: string; readonly down: number; readonly seaward: number }[];
  };
  /** The spoiled readings, and by how much: metres or radians. */
  readonly blunders: readonly { readonly reading: string; readonly offset: number; readonly story: string }[];
}

const epochs = 6;
const daysPerEpoch = 10;
const start = Date.parse("2031-03-03T06:00:00Z");
const day = 86_400_000;
const sight = 40_000; // milliseconds between one target and the next

const milligon = Math.PI / 200_000;
const deviations = { direction: 0.3 * milligon, zenith: 0.3 * milligon, distance: 0.8e-3, distancePerMetre: 1e-6, reference: 1e-3 };

/** Pillars see the marks within this, neighbouring pillars, and every reference within sight. */
const markReach = 135;
const pillarReach = 190;
const referenceReach = 420;

const settled = { bollard: "B11.0", fromEpoch: 4, down: 7.5e-3, seaward: 2.5e-3, width: 15 };
/** Share of the movement that an epoch sees. It goes on in the nights between epochs, when nobody measures: a simplification. */
const progress = [0, 0, 0, 0.6, 0.85, 1];

const blunders = [
  { reading: "e2/S3/B08.2/slope-distance", offset: -0.0175, story: "another prism's constant was set" },
  { reading: "e3/S6/B20.3/direction", offset: 6 * milligon, story: "the fender bolt beside the mark was sighted" },
  { reading: "e5/S2/B05.6/zenith-angle", offset: -9 * milligon, story: "two digits were swapped in the field book" },
];

const point = (name: string, value: readonly number[]): StateAt => ({
  name,
  kind: stateKinds["point-3d"],
  value: Float64Array.from(value),
});

/** How far a mark has gone by the last epoch: a bowl about the bollard. */
function finalMovement(mark: Mark): { down: number; seaward: number } {
  const centre = marks.find(({ name }) => name === settled.bollard)!;
  const shape = Math.exp(-(((mark.distance - centre.distance) / settled.width) ** 2) / 2);
  return { down: settled.down * shape, seaward: settled.seaward * shape };
}

function positionAt(mark: Mark, epoch: number): number[] {
  const movement = finalMovement(mark);
  const share = progress[epoch - 1]!;
  const [x, y, z] = mark.at;
  return [x + share * movement.seaward * seaward.x, y + share * movement.seaward * seaward.y, z - share * movement.down];
}

const stateName = (mark: Mark, epoch: number): string => `${mark.name}@${epoch}`;

/** Every mark in every later epoch against the first: the pairs of states to compare. */
export function epochComparisons(): { mark: string; bay: number; epoch: number; states: readonly [string, string] }[] {
  const later = Array.from({ length: epochs - 1 }, (_, k) => k + 2);
  return marks.flatMap((mark) =>
    later.map((epoch) => ({ mark: mark.name, bay: mark.bay, epoch, states: [stateName(mark, 1), stateName(mark, epoch)] as const })),
  );
}

const markState = (mark: Mark, epoch: number): StateAt => point(stateName(mark, epoch), positionAt(mark, epoch));

/** The log of the monitoring, entry by entry, and the truth beside it. The same options give the same log. */
export function quayMonitoring(options: MonitoringOptions = {}): { entries: Iterable<LogEntry>; truth: MonitoringTruth } {
  const { seed = 1031, rounds = 1 } = options;
  const moved = marks
    .map((mark) => ({ mark: mark.name, ...finalMovement(mark) }))
    .filter(({ down, seaward }) => Math.hypot(down, seaward) >= 1e-3)
    .sort((a, b) => b.down - a.down);
  const places = [...stations, ...references].map(({ name, at }) => [name, at] as const);
  const markPlaces = marks.flatMap((mark) =>
    Array.from({ length: epochs }, (_, k) => [stateName(mark, k + 1), positionAt(mark, k + 1)] as const),
  );
  const truth: MonitoringTruth = {
    seed,
    epochs,
    positions: Object.fromEntries([...places, ...markPlaces]),
    settlement: { bollard: settled.bollard, fromEpoch: settled.fromEpoch, moved },
    blunders,
  };
  return { entries: monitoringLog(seed, rounds), truth };
}

function* monitoringLog(seed: number, rounds: number): Generator<LogEntry> {
  const noise = random(seed);
  const units = { length: "m", angle: "gon", time: "s" } as const;
  yield {
    type: "header",
    title: "Kestermouth, Lantern Quay: wall monitoring",
    units,
    deviationUnits: { ...units, length: "mm", angle: "mgon" },
  };
  yield {
    type: "comment",
    text: "An invented port: no real place, no real wall. Marks are named by bay and number, with the epoch after @.",
  };

  for (const { name, at } of references) {
    yield { type: "state", name, kind: "point-3d", fixed: false };
    const coordinates = Array<number>(3).fill(deviations.reference);
    yield simulateReading("position", [point(name, at)], coordinates, noise, {
      name: `given/${name}`,
      time: new Date(start).toISOString(),
    });
  }
  // Approximate values as somebody would read them off a plan.
  for (const { name, at } of stations)
    yield { type: "state", name, kind: "point-3d", value: Float64Array.from(at, Math.round), fixed: false };

  for (let epoch = 1; epoch <= epochs; epoch++) {
    for (const mark of marks) yield { type: "state", name: stateName(mark, epoch), kind: "point-3d", fixed: false };
    for (const [k, station] of stations.entries()) {
      for (let round = 1; round <= rounds; round++) {
        const setName = `${station.name}/e${epoch}${rounds > 1 ? `/r${round}` : ""}`;
        const orientation: StateAt = {
          name: setName,
          kind: stateKinds.orientation,
          value: Float64Array.of(2 * Math.PI * (noise.uniform() - 0.5)),
        };
        yield { type: "state", name: setName, kind: "orientation", fixed: false };
        let time = start + ((epoch - 1) * daysPerEpoch + k) * day + (round - 1) * 3_600_000;
        for (const target of targets(station, epoch)) {
          time += sight;
          const label = `e${epoch}/${station.name}/${target.name.split("@")[0]}`;
          yield* sights(point(station.name, station.at), target, orientation, noise, label, round, time);
        }
      }
    }
  }
}

/** What a pillar sights in an epoch: references and pillars first, to orient the set, then marks along the quay. */
function targets(station: Place, epoch: number): StateAt[] {
  const within = (reach: number) => (place: Place) => place.name !== station.name && planDistance(place.at, station.at) <= reach;
  return [
    ...references.filter(within(referenceReach)).map(({ name, at }) => point(name, at)),
    ...stations.filter(within(pillarReach)).map(({ name, at }) => point(name, at)),
    ...marks.filter(within(markReach)).map((mark) => markState(mark, epoch)),
  ];
}

const roundTo = (unit: number, number: number): number => Math.round(number / unit) * unit;

/** One target sighted: direction, zenith angle, slope distance. */
function* sights(
  station: StateAt,
  target: StateAt,
  orientation: StateAt,
  noise: ReturnType<typeof random>,
  label: string,
  round: number,
  time: number,
): Generator<ReadingEntry> {
  const range = Math.hypot(...target.value.map((number, k) => number - station.value[k]!));
  const readings = [
    { kind: "direction", states: [station, target, orientation], deviation: deviations.direction },
    { kind: "zenith-angle", states: [station, target], deviation: deviations.zenith },
    {
      kind: "slope-distance",
      states: [station, target],
      deviation: roundTo(1e-5, deviations.distance + deviations.distancePerMetre * range),
    },
  ] as const;
  for (const { kind, states, deviation } of readings) {
    const name = `${label}/${kind}`;
    const offset = round === 1 ? (blunders.find(({ reading }) => reading === name)?.offset ?? 0) : 0;
    yield simulateReading(kind, states, [deviation], noise, {
      name: round > 1 ? `${name}/r${round}` : name,
      time: new Date(time).toISOString(),
      offset,
    });
  }
}
