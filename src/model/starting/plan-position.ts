import type { Reading } from "../reading.js";
import { azimuthBetween } from "../readings/directions.js";
import type { StateAt } from "../states.js";
import { plumbHeight } from "./heights.js";
import { type Known, otherEnd } from "./known.js";
import { circle, inscribedArc, type Locus, meetingPoint, type PlanPoint, ray } from "./loci.js";

const placeOf = (state: StateAt): PlanPoint => [state.value[0]!, state.value[1]!];

/** A position in plan from readings to known states: given outright, by a polar point, by intersection, or by resection. */
export function planPosition(name: string, readings: readonly Reading[], known: Known): PlanPoint | "ambiguous" | undefined {
  for (const reading of readings) {
    const point = outright(name, reading, known);
    if (point) return point;
  }
  const loci = readings.flatMap((reading) => locus(name, reading, readings, known) ?? []);
  for (const set of resectionSights(name, readings, known).values())
    for (const { mark, reading } of set.slice(1)) loci.push(inscribedArc(set[0]!.mark, mark, reading - set[0]!.reading));
  return meetingPoint(loci);
}

/** One reading that gives the point by itself. */
function outright(name: string, { kind, states, value }: Reading, known: Known): PlanPoint | undefined {
  const [first, second] = states;
  if (kind === "position") return [value[0]!, value[1]!];
  const other = otherEnd(name, states, known);
  if (other === undefined) return undefined;
  const [x, y] = placeOf(other);
  if (kind === "coordinate-difference") return first === name ? [x - value[0]!, y - value[1]!] : [x + value[0]!, y + value[1]!];
  if (kind !== "range-bearing" || second !== name) return undefined;
  const bearing = other.value[2]! + value[1]!;
  return [x + value[0]! * Math.cos(bearing), y + value[0]! * Math.sin(bearing)];
}

/** The line or circle on which one reading to known states puts the point. */
function locus(name: string, reading: Reading, readings: readonly Reading[], known: Known): Locus | undefined {
  const { kind, states } = reading;
  const value = reading.value[0]!;
  const [first, second, third] = states.map(known);
  const nameIsFirst = states[0] === name;
  const other = nameIsFirst ? second : first;
  switch (kind) {
    case "distance":
      return other && circle(placeOf(other), value);
    case "slope-distance": {
      const plan = other && planDistance(name, reading, readings, other);
      return plan === undefined ? undefined : circle(placeOf(other!), plan);
    }
    case "azimuth":
      return other && ray(placeOf(other), nameIsFirst ? value + Math.PI : value);
    case "direction":
      return other && third && ray(placeOf(other), third.value[0]! + value + (nameIsFirst ? Math.PI : 0));
    case "angle":
      if (nameIsFirst) return second && third && inscribedArc(placeOf(second), placeOf(third), value);
      if (states[1] === name) return first && third && ray(placeOf(first), azimuthBetween(first, third) - value);
      return first && second && ray(placeOf(first), azimuthBetween(first, second) + value);
    default:
      return undefined;
  }
}

/** A slope distance laid flat: by the zenith angle along the same sight, or by a difference of height from elsewhere. */
function planDistance(name: string, reading: Reading, readings: readonly Reading[], other: StateAt): number | undefined {
  const slope = reading.value[0]!;
  const zenith = readings.find(({ kind, states }) => kind === "zenith-angle" && states.includes(name) && states.includes(other.name));
  if (zenith) return slope * Math.sin(zenith.value[0]!);
  const height = plumbHeight(name, readings, (state) => (state === other.name ? other : undefined));
  if (height === undefined) return undefined;
  const { instrumentHeight = 0, targetHeight = 0 } = reading.setup ?? {};
  const rise = (height - other.value[2]!) * (reading.states[0] === name ? -1 : 1) + targetHeight - instrumentHeight;
  return Math.sqrt(Math.max(0, slope ** 2 - rise ** 2));
}

/** Circle readings at the point itself to known marks, set by set, where the set's orientation is not known. */
function resectionSights(name: string, readings: readonly Reading[], known: Known): Map<string, { mark: PlanPoint; reading: number }[]> {
  const sets = new Map<string, { mark: PlanPoint; reading: number }[]>();
  for (const { kind, states, value } of readings) {
    if (kind !== "direction" || states[0] !== name || known(states[2]!)) continue;
    const target = known(states[1]!);
    if (!target) continue;
    const set = sets.get(states[2]!) ?? [];
    set.push({ mark: placeOf(target), reading: value[0]! });
    sets.set(states[2]!, set);
  }
  return sets;
}
