import type { Reading } from "../reading.js";
import { heightIndex } from "../reading-form.js";
import { type Known, otherEnd } from "./known.js";
import type { PlanPoint } from "./loci.js";

/** A height that does not depend on where the state lies in plan: given outright, or by a difference of height from a known one. */
export function plumbHeight(name: string, readings: readonly Reading[], known: Known): number | undefined {
  for (const { kind, states, value } of readings) {
    if (kind === "position" && value.length === 3) return value[2]!;
    const other = otherEnd(name, states, known);
    if (other === undefined) continue;
    const sign = states[0] === name ? -1 : 1;
    if (kind === "height-difference") return other.value[heightIndex(other)]! + sign * value[0]!;
    if (kind === "coordinate-difference" && value.length === 3) return other.value[2]! + sign * value[2]!;
  }
  return undefined;
}

/** A height from a zenith angle along a sight whose length in plan is known. */
export function sightedHeight(name: string, place: PlanPoint, readings: readonly Reading[], known: Known): number | undefined {
  for (const { kind, states, value, setup } of readings) {
    const other = kind === "zenith-angle" ? otherEnd(name, states, known) : undefined;
    if (other === undefined) continue;
    const plan = Math.hypot(place[0] - other.value[0]!, place[1] - other.value[1]!);
    const rise = plan / Math.tan(value[0]!) + (setup?.instrumentHeight ?? 0) - (setup?.targetHeight ?? 0);
    return other.value[2]! + (states[0] === name ? -rise : rise);
  }
  return undefined;
}
