import { wrapAngle } from "../quantities.js";
import type { Reading, StateDeclaration } from "../reading.js";
import { azimuthBetween } from "../readings/directions.js";
import { type StateAt, type StateKindName, stateKinds } from "../states.js";
import { plumbHeight, sightedHeight } from "./heights.js";
import { type Known, otherEnd } from "./known.js";
import { planPosition } from "./plan-position.js";
import { planarPose, spatialPose } from "./poses.js";

/** A state for which no starting value follows from its readings. */
export interface MissingStart {
  readonly name: string;
  /** `ambiguous`: two places fit its readings equally well. `open`: they do not tie it down through states that have values. */
  readonly why: "ambiguous" | "open";
}

/**
 * A value for one state from its readings to states that have values: good enough to start Gauss–Newton from, not an estimate.
 *
 * Numbers by a reading or a difference; an orientation by sights to known targets; a point by coordinates, polar readings, intersection of
 * rays and arcs, or resection; a height by differences and zenith angles; a pose by steps, or (planar) by two marks it sees.
 */
export function startingValue(
  name: string,
  kind: StateKindName,
  readings: readonly Reading[],
  known: Known,
): Float64Array | "ambiguous" | undefined {
  switch (kind) {
    case "planar-pose":
      return planarPose(name, readings, known);
    case "spatial-pose":
      return spatialPose(name, readings, known);
    case "height": {
      const height = plumbHeight(name, readings, known);
      return height === undefined ? number(name, readings, known) : Float64Array.of(height);
    }
    case "orientation":
      return orientation(name, readings, known) ?? number(name, readings, known);
    case "point-2d":
    case "point-3d": {
      const place = planPosition(name, readings, known);
      if (place === undefined || place === "ambiguous") return place;
      if (kind === "point-2d") return Float64Array.from(place);
      const height = plumbHeight(name, readings, known) ?? sightedHeight(name, place, readings, known);
      return height === undefined ? undefined : Float64Array.of(...place, height);
    }
    default:
      return number(name, readings, known);
  }
}

function number(name: string, readings: readonly Reading[], known: Known): Float64Array | undefined {
  for (const { kind, states, value } of readings) {
    if (kind === "scalar") return value.slice();
    const other = kind === "scalar-difference" ? otherEnd(name, states, known) : undefined;
    if (other) return Float64Array.of(other.value[0]! + (states[1] === name ? value[0]! : -value[0]!));
  }
  return undefined;
}

/** The mean, on the circle, of azimuth minus reading over the sights between known ends. */
function orientation(name: string, readings: readonly Reading[], known: Known): Float64Array | undefined {
  let [east, north] = [0, 0];
  for (const { kind, states, value } of readings) {
    if (kind !== "direction" || states[2] !== name) continue;
    const [station, target] = [known(states[0]!), known(states[1]!)];
    if (!station || !target) continue;
    const angle = azimuthBetween(station, target) - value[0]!;
    east += Math.sin(angle);
    north += Math.cos(angle);
  }
  return east === 0 && north === 0 ? undefined : Float64Array.of(wrapAngle(Math.atan2(east, north)));
}

/**
 * Starting values for every state that lacks one, each from those before it.
 * @returns the states at their given or found values, in the order given, and those that stay open.
 * Cost: each state is tried again only when a neighbour has got a value.
 */
export function startingValues(
  states: Iterable<StateDeclaration>,
  readings: Iterable<Reading>,
): { values: Map<string, StateAt>; missing: MissingStart[] } {
  const declared = [...states];
  const values = new Map<string, StateAt>();
  const readingsOf = new Map<string, Reading[]>(declared.map(({ name }) => [name, []]));
  for (const reading of readings) for (const state of reading.states) readingsOf.get(state)!.push(reading);
  const known: Known = (name) => values.get(name);
  for (const { name, kind, value } of declared) if (value) values.set(name, { name, kind: stateKinds[kind], value });

  const kinds = new Map(declared.map(({ name, kind }) => [name, kind]));
  const ambiguous = new Set<string>();
  let waiting = new Set(declared.flatMap(({ name, value }) => (value ? [] : [name])));
  while (waiting.size > 0) {
    const next = new Set<string>();
    for (const name of waiting) {
      const kind = kinds.get(name)!;
      const found = startingValue(name, kind, readingsOf.get(name)!, known);
      if (found === "ambiguous") ambiguous.add(name);
      if (found === undefined || found === "ambiguous") continue;
      values.set(name, { name, kind: stateKinds[kind], value: found });
      for (const { states } of readingsOf.get(name)!) for (const state of states) if (!values.has(state)) next.add(state);
    }
    for (const name of values.keys()) next.delete(name);
    waiting = next;
  }
  const missing = declared.flatMap(({ name }): MissingStart[] =>
    values.has(name) ? [] : [{ name, why: ambiguous.has(name) ? "ambiguous" : "open" }],
  );
  return { values: new Map(declared.flatMap(({ name }) => (values.has(name) ? [[name, values.get(name)!] as const] : []))), missing };
}
