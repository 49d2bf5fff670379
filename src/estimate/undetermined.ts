// Which states the measurements leave undetermined, how these can move, and what would mend it.
import { type Cluster, type Motion, motionsOf, type RowsWithNoise } from "./motions.js";
import { type NullSpace, nullSpace } from "./null-space.js";
import { norm } from "./orthogonal.js";

/** A state as messages name it. */
export interface StateFacts {
  readonly id: number;
  readonly dimension: number;
  readonly name?: string | undefined;
}

/** States that can move without changing any prediction. */
export interface Undetermined {
  readonly states: readonly number[];
  /** As the states were named, or "state 7". */
  readonly names: readonly string[];
  readonly motions: readonly Motion[];
  /** Measurements do hold all of these states, but too weakly for an information matrix in f64. */
  readonly isWeak: boolean;
  /** What would hold them. */
  readonly remedy: string;
  /** All of it in sentences: who can move, how, why, and the remedy. */
  readonly because: string;
}

/** A state moves when its part of the motions stands above the widest gap between the sizes of such parts (moving states differ by their
 *  weights, standing ones are rounding), looked for below this share of the largest. */
const SURELY_MOVING = 1e-2;
/** A gap of this factor or more parts moving from standing. */
const GAP = 100;
/** What a row sees of moving states, in its standard deviations, while the whole motion changes less than 3e-9 of them; and as a share of
 *  what it would see without cancellation. */
const SEEN = 3e-8;
const SEEN_SHARE = 1e-3;
/** Names told in a message. */
const NAMES_TOLD = 5;

/**
 * The states that `rows` leave undetermined; undefined when all of them are determined well enough for an information matrix in f64.
 * @param rows all that is known, whitened; rows that tell their noise let distances be recognized.
 * Structure first: parts that no row ties together are looked at one by one. Then the null space of each part's rows, and the plain motions in it.
 * Cost: a factorization and a few solves with ten columns; well under a second for 10 000 states.
 */
export function findUndetermined(states: readonly StateFacts[], rows: readonly RowsWithNoise[]): Undetermined | undefined {
  const facts = new Map(states.map((state) => [state.id, state]));
  const dimensionOf = (state: number): number => facts.get(state)!.dimension;
  const found = { motions: [] as Motion[], isWeak: true, isPartial: false };
  for (const part of partsOf(
    states.map(({ id }) => id),
    rows,
  )) {
    if (part.rows.length === 0) {
      found.isWeak = false;
      const because = "no measurement reads it";
      found.motions.push({ kind: "free", states: part.states, count: dimensionOf(part.states[0]!), because });
      continue;
    }
    const space = nullSpace(part.states, dimensionOf, part.rows);
    if (space.dimension === 0) continue;
    found.isWeak &&= space.isWeak;
    found.isPartial ||= space.isPartial;
    for (const { cluster, basis, scale } of clustersOf(part, space, dimensionOf))
      found.motions.push(...motionsOf(cluster, basis, space.dimension, scale));
  }
  if (found.motions.length === 0) return undefined;
  const moving = new Set(found.motions.flatMap((motion) => motion.states));
  const ids = states.map(({ id }) => id).filter((id) => moving.has(id));
  const nameOf = (id: number): string => facts.get(id)!.name ?? `state ${id}`;
  const remedy = remedyFor(found.motions, nameOf);
  return {
    states: ids,
    names: ids.map(nameOf),
    motions: found.motions,
    isWeak: found.isWeak,
    remedy,
    because: inSentences(ids, found, nameOf, remedy),
  };
}

interface Part {
  readonly states: readonly number[];
  readonly rows: readonly RowsWithNoise[];
}

/** Connected parts: states that rows tie together, in order of their first state. */
function partsOf(states: readonly number[], rows: readonly RowsWithNoise[]): Part[] {
  const leader = new Map(states.map((state) => [state, state]));
  const leaderOf = (state: number): number => {
    let at = state;
    for (let next = leader.get(at)!; next !== at; next = leader.get(at)!) {
      leader.set(at, leader.get(next)!);
      at = next;
    }
    return at;
  };
  for (const row of rows) for (const state of row.states) leader.set(leaderOf(state), leaderOf(row.states[0]!));
  const parts = new Map<number, { states: number[]; rows: RowsWithNoise[] }>();
  for (const state of states) {
    const part = parts.get(leaderOf(state));
    if (part) part.states.push(state);
    else parts.set(leaderOf(state), { states: [state], rows: [] });
  }
  for (const row of rows) parts.get(leaderOf(row.states[0]!))!.rows.push(row);
  return [...parts.values()];
}

/** Moving states that rows tie together, standing ones left out, each with its own part of the null space. */
function clustersOf(
  part: Part,
  space: NullSpace,
  dimensionOf: (state: number) => number,
): { cluster: Cluster; basis: Float64Array; scale: Float64Array }[] {
  const first = new Map<number, number>();
  let at = 0;
  for (const state of part.states) {
    first.set(state, at);
    at += dimensionOf(state);
  }
  const moving = movingStates(part.states, space, first, dimensionOf);
  drawAlong(moving, part.rows, space, first);
  const restricted: RowsWithNoise[] = [];
  for (const row of part.rows) {
    const kept = [...row.states.keys()].filter((k) => moving.has(row.states[k]!));
    if (kept.length === 0) continue;
    restricted.push({ ...row, states: kept.map((k) => row.states[k]!), blocks: kept.map((k) => row.blocks[k]!) });
  }
  return partsOf([...moving], restricted).map(({ states, rows }) => {
    const dimensions = states.map(dimensionOf);
    const order = dimensions.reduce((sum, d) => sum + d, 0);
    const basis = new Float64Array(order * space.dimension);
    const scale = new Float64Array(order);
    const places = new Map<number, number>();
    let to = 0;
    for (const [k, state] of states.entries()) {
      places.set(state, to);
      for (let u = 0; u < dimensions[k]!; u += 1, to += 1) {
        const from = first.get(state)! + u;
        scale[to] = space.scale[from]!;
        for (let c = 0; c < space.dimension; c += 1) basis[c * order + to] = space.basis[c * space.order + from]!;
      }
    }
    return { cluster: { states, dimensions, rows, first: places, order, isWhole: states.length === part.states.length }, basis, scale };
  });
}

function movingStates(
  states: readonly number[],
  { basis, order, dimension }: NullSpace,
  first: ReadonlyMap<number, number>,
  dimensionOf: (state: number) => number,
): Set<number> {
  const sizes = states.map((state) => {
    let sum = 0;
    for (let c = 0; c < dimension; c += 1) sum += norm(basis, c * order + first.get(state)!, dimensionOf(state)) ** 2;
    return Math.sqrt(sum);
  });
  const descending = Float64Array.from(sizes).sort().reverse();
  const largest = descending[0]!;
  let threshold = 0;
  let widest = GAP;
  for (let k = 1; k < descending.length; k += 1) {
    const gap = descending[k - 1]! / Math.max(descending[k]!, Number.EPSILON * largest);
    if (descending[k]! > SURELY_MOVING * largest || gap < widest) continue;
    widest = gap;
    threshold = descending[k - 1]!;
  }
  return new Set(states.filter((_, k) => sizes[k]! >= threshold));
}

/** Adds states that must move since a row would else see the others move: those that are read so weakly that their part of the motion,
 *  scaled by what reads them, looks like rounding. */
function drawAlong(moving: Set<number>, rows: readonly RowsWithNoise[], space: NullSpace, first: ReadonlyMap<number, number>): void {
  for (let grown = true; grown; ) {
    grown = false;
    for (const row of rows) {
      const standing = row.states.filter((state) => !moving.has(state));
      if (standing.length === 0 || standing.length === row.states.length || !seesMotion(row, moving, space, first)) continue;
      for (const state of standing) moving.add(state);
      grown = true;
    }
  }
}

/** Whether the moving states alone change what a row reads. */
function seesMotion(
  { states, blocks, rows }: RowsWithNoise,
  moving: ReadonlySet<number>,
  { scale, basis, order, dimension }: NullSpace,
  first: ReadonlyMap<number, number>,
): boolean {
  for (let c = 0; c < dimension; c += 1) {
    for (let q = 0; q < rows; q += 1) {
      let [change, uncancelled] = [0, 0];
      for (let k = 0; k < states.length; k += 1) {
        if (!moving.has(states[k]!)) continue;
        const from = first.get(states[k]!)!;
        for (let u = 0; u * rows < blocks[k]!.length; u += 1) {
          const term = blocks[k]![u * rows + q]! * scale[from + u]! * basis[c * order + from + u]!;
          change += term;
          uncancelled += Math.abs(term);
        }
      }
      if (Math.abs(change) > Math.max(SEEN, SEEN_SHARE * uncancelled)) return true;
    }
  }
  return false;
}

function listed(states: readonly number[], nameOf: (id: number) => string): string {
  const told = states.slice(0, NAMES_TOLD).map(nameOf);
  if (states.length > NAMES_TOLD) return `${told.join(", ")} and ${states.length - NAMES_TOLD} more`;
  return told.length > 1 ? `${told.slice(0, -1).join(", ")} and ${told.at(-1)}` : told.join("");
}

const number = (value: number): string => String(Number(value.toPrecision(3)));

/** "along its first unknown", "along (0.6, 0.8)". */
function along(direction: readonly number[]): string {
  const axis = direction.findIndex((value, k) => value === 1 && direction.every((other, j) => j === k || other === 0));
  return axis < 0 ? `along (${direction.map(number).join(", ")})` : `along unknown ${axis}`;
}

function inWords(motion: Motion, nameOf: (id: number) => string): string {
  const { kind, states, direction, count, because } = motion;
  const who = listed(states, nameOf);
  const alone = states.length === 1;
  if (kind === "shift") return `${who} can shift ${alone ? "" : "together "}${along(direction!)}: ${because}`;
  if (kind === "turn") return `${who} can turn ${alone ? "on the spot" : "together about a point"}: ${because}`;
  return `${who} can move in ${count === 1 ? "one other way" : `${count} ways`}: ${because}`;
}

function inSentences(
  ids: readonly number[],
  { motions, isWeak, isPartial }: { motions: readonly Motion[]; isWeak: boolean; isPartial: boolean },
  nameOf: (id: number) => string,
  remedy: string,
): string {
  const count = ids.length === 1 ? "One state is" : `${ids.length} states are`;
  const told = motions.slice(0, NAMES_TOLD).map((motion) => `${inWords(motion, nameOf)}.`);
  if (motions.length > NAMES_TOLD || isPartial) told.push("There are further motions.");
  const weak = isWeak ? " (or held so weakly that their information is lost beside the other measurements')" : "";
  return `${count} not determined by the measurements${weak}. ${told.join(" ")} To mend it: ${remedy}.`;
}

function remedyFor(motions: readonly Motion[], nameOf: (id: number) => string): string {
  const parts = new Set<string>();
  for (const { kind, states, count } of motions.slice(0, NAMES_TOLD)) {
    const one = nameOf(states[0]!);
    if (kind === "shift")
      parts.add(`add a prior or a fix on ${states.length === 1 ? one : `one of them (${one}, say), or a tie to a state that is fixed`}`);
    else if (kind === "turn") parts.add(`add a direction, or a prior or a fix on a second state of those that turn`);
    else if (states.length === 1) parts.add(`add a measurement that reads ${one}, or a prior on it`);
    else parts.add(`add ${count} more independent measurements among ${listed(states, nameOf)}, or priors on them`);
  }
  return [...parts].join("; ");
}
