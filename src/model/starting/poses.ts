import { wrapAngle } from "../quantities.js";
import type { Reading } from "../reading.js";
import { apply, conjugate, multiplyQuaternions, type Quaternion, rotationMatrix, type Vector3 } from "../rotations.js";
import { attitude, stateKinds } from "../states.js";
import { type Known, otherEnd } from "./known.js";

/** A planar pose: measured whole, by a step from or to a known pose, or by two or more marks it sees. */
export function planarPose(name: string, readings: readonly Reading[], known: Known): Float64Array | undefined {
  for (const { kind, states, value } of readings) {
    if (kind === "pose") return value.slice();
    const other = kind === "relative-pose" ? otherEnd(name, states, known) : undefined;
    if (other === undefined) continue;
    const [x, y, heading] = other.value as unknown as [number, number, number];
    const [forward, left, turn] = value as unknown as [number, number, number];
    if (states[1] === name) return step(x, y, heading, forward, left, heading + turn);
    return step(x, y, heading - turn, -forward, -left, heading - turn);
  }
  return fromMarks(name, readings, known);
}

/** A place `forward` and `left` of x, y along `axis`, with a heading. */
function step(x: number, y: number, axis: number, forward: number, left: number, heading: number): Float64Array {
  const [c, s] = [Math.cos(axis), Math.sin(axis)];
  return Float64Array.of(x + c * forward - s * left, y + s * forward + c * left, wrapAngle(heading));
}

/**
 * The pose that lays two or more marks, as the vehicle sees them, best on their known places: turn about the centroids, then shift.
 * Source: the two-dimensional case of Arun, Huang, Blostein (1987), "Least-squares fitting of two 3-D point sets".
 */
function fromMarks(name: string, readings: readonly Reading[], known: Known): Float64Array | undefined {
  const seen: { local: [number, number]; place: [number, number] }[] = [];
  for (const { kind, states, value } of readings) {
    const mark = kind === "range-bearing" && states[0] === name ? known(states[1]!) : undefined;
    if (mark === undefined) continue;
    const [range, bearing] = value as unknown as [number, number];
    seen.push({ local: [range * Math.cos(bearing), range * Math.sin(bearing)], place: [mark.value[0]!, mark.value[1]!] });
  }
  const mean = (of: "local" | "place", axis: 0 | 1) => seen.reduce((sum, one) => sum + one[of][axis], 0) / seen.length;
  const [u0, v0, x0, y0] = [mean("local", 0), mean("local", 1), mean("place", 0), mean("place", 1)];
  let [along, across] = [0, 0];
  for (const { local, place } of seen) {
    const [u, v, x, y] = [local[0] - u0, local[1] - v0, place[0] - x0, place[1] - y0];
    along += u * x + v * y;
    across += u * y - v * x;
  }
  if (Math.hypot(along, across) === 0) return undefined; // fewer than two places
  const heading = Math.atan2(across, along);
  return step(x0, y0, heading, -u0, -v0, heading);
}

/** A spatial pose: measured whole, or by a step from or to a known pose. */
export function spatialPose(name: string, readings: readonly Reading[], known: Known): Float64Array | undefined {
  for (const { kind, states, value } of readings) {
    if (kind === "pose") return value.slice();
    const other = kind === "relative-pose" ? otherEnd(name, states, known) : undefined;
    if (other === undefined) continue;
    const shift: Vector3 = [value[0]!, value[1]!, value[2]!];
    const forwards = states[1] === name;
    const turn: Quaternion = multiplyQuaternions(attitude(other.value), forwards ? attitude(value) : conjugate(attitude(value)));
    // A step is measured in the axes of its first pose: the known one's going forwards, the wanted one's going back.
    const [dx, dy, dz] = apply(rotationMatrix(forwards ? attitude(other.value) : turn), shift);
    const sign = forwards ? 1 : -1;
    return stateKinds["spatial-pose"].normalize([
      other.value[0]! + sign * dx,
      other.value[1]! + sign * dy,
      other.value[2]! + sign * dz,
      ...turn,
    ]);
  }
  return undefined;
}
