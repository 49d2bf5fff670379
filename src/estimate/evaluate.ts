// What candidates would tell if they were added: innovation covariance, Mahalanobis distance, information gain; nothing is changed.
import { crossBlocks, eachMarginal, jointCovariance } from "./marginals.js";
import { restoreColumns } from "./noise.js";
import type { CheckedMeasurement } from "./rows.js";
import type { System } from "./system.js";
import type { KeptView, Tracked } from "./tracked.js";

export interface Evaluation {
  /** Residual minus Jacobian times the present solution, one number a row. */
  readonly innovation: Float64Array;
  /** S = J Σ Jᵀ + R, rows × rows, row-major. */
  readonly innovationCovariance: Float64Array;
  /** νᵀ S⁻¹ ν: χ²-distributed with as many degrees of freedom as rows when the candidate belongs. */
  readonly mahalanobisSquared: number;
  /** ½ log det (R⁻¹ S), in nats: how much the states' entropy would fall. */
  readonly informationGain: number;
}

/** Distinct states from which one backward solve for the whole solution is cheaper than a path each. */
const MANY_STATES = 8;

/** Blocks of Σ between states that candidates read together. */
class Blocks {
  readonly #blocks = new Map<number, Float64Array>();
  readonly #slots: number;
  constructor(slots: number) {
    this.#slots = slots;
  }
  key(a: number, b: number): number {
    return a * this.#slots + b;
  }
  /** Σ[a, b], row-major, dimension of a × dimension of b. */
  set(a: number, b: number, block: Float64Array): void {
    this.#blocks.set(this.key(a, b), block);
  }
  get(a: number, b: number): Float64Array {
    return this.#blocks.get(this.key(a, b))!;
  }
}

/**
 * @param solution the estimate at all positions, made when it is first needed.
 * @param tracked kept numbers, when they are current.
 * Cost: candidates share their solves: a path for each distinct state whose block is not kept, and one pass for each state that several
 * others are paired with.
 */
export function evaluate(
  system: System,
  candidates: readonly CheckedMeasurement[],
  solution: () => Float64Array,
  tracked: Tracked | undefined,
): Evaluation[] {
  if (tracked && tracked.columnState >= 0) {
    const results = evaluateKept(system, candidates, tracked, solution);
    if (results) return results;
  }
  const blocks = new Blocks(system.slots);
  const partners = new Map<number, Set<number>>();
  const of = (slot: number): Set<number> => {
    let set = partners.get(slot);
    if (!set) {
      set = new Set();
      partners.set(slot, set);
    }
    return set;
  };
  for (const { states } of candidates) {
    const slots = states.map((state) => system.slotOf(state));
    for (const [k, slot] of slots.entries()) {
      of(slot);
      for (const other of slots.slice(0, k)) {
        of(slot).add(other);
        of(other).add(slot);
      }
    }
  }
  const distinct = [...partners.keys()];
  const values = new Map<number, Float64Array>();
  if (!tracked || distinct.length < MANY_STATES) {
    eachMarginal(system, distinct, (k, block, value) => {
      blocks.set(distinct[k]!, distinct[k]!, block);
      values.set(distinct[k]!, value);
    });
  } else for (const slot of distinct) blocks.set(slot, slot, tracked.block(system, slot));
  if (values.size === 0) {
    const x = solution();
    for (const slot of distinct) values.set(slot, x.subarray(system.positionOf(slot), system.positionOf(slot + 1)));
  }

  const bySharing = distinct.toSorted((a, b) => of(b).size - of(a).size);
  const kept = tracked && tracked.columnState >= 0 ? system.slotOf(tracked.columnState) : -1;
  if (kept >= 0 && partners.has(kept)) bySharing.unshift(kept);
  for (const hub of bySharing) {
    const others = [...of(hub)];
    if (others.length === 0) continue;
    if (hub === kept) takeFromColumn(system, tracked!, blocks, hub, others);
    else if (others.length === 1) takeJoint(system, blocks, hub, others[0]!);
    else
      crossBlocks(system, hub, others).forEach((block, k) => {
        blocks.set(others[k]!, hub, block);
        blocks.set(hub, others[k]!, transpose(block, system.dimensionAt(others[k]!)));
      });
    for (const other of others) of(other).delete(hub);
    of(hub).clear();
  }
  return candidates.map((candidate) => {
    const joint = new Joint(candidate, system);
    for (const [a, slotA] of joint.slots.entries()) {
      joint.takeValue(a, values.get(slotA)!);
      for (const [b, slotB] of joint.slots.entries()) joint.takeBlock(a, b, blocks.get(slotA, slotB));
    }
    return judge(candidate, joint.covariance, joint.value);
  });
}

/** The covariance and value of all unknowns that one candidate reads, side by side in its order. */
class Joint {
  readonly slots: readonly number[];
  readonly #first: number[] = [];
  readonly #system: System;
  readonly #order: number;
  readonly covariance: Float64Array;
  readonly value: Float64Array;

  constructor({ states }: CheckedMeasurement, system: System) {
    this.#system = system;
    this.slots = states.map((state) => system.slotOf(state));
    let order = 0;
    for (const slot of this.slots) {
      this.#first.push(order);
      order += system.dimensionAt(slot);
    }
    this.#order = order;
    this.covariance = new Float64Array(order * order);
    this.value = new Float64Array(order);
  }

  takeValue(a: number, x: Float64Array): void {
    this.value.set(x, this.#first[a]!);
  }
  /** Σ[a, b], row-major. */
  takeBlock(a: number, b: number, block: Float64Array): void {
    const columns = this.#system.dimensionAt(this.slots[b]!);
    for (let k = 0; k < block.length; k += 1)
      this.covariance[(this.#first[a]! + Math.floor(k / columns)) * this.#order + this.#first[b]! + (k % columns)] = block[k]!;
  }
}

/** Candidates that pair no two states but with that of the kept column: all that they need is kept. Undefined when one does. */
function evaluateKept(
  system: System,
  candidates: readonly CheckedMeasurement[],
  tracked: Tracked,
  solution: () => Float64Array,
): Evaluation[] | undefined {
  const kept = system.slotOf(tracked.columnState);
  for (const { states } of candidates)
    if (states.length > 2 || (states.length === 2 && system.slotOf(states[0]!) !== kept && system.slotOf(states[1]!) !== kept))
      return undefined;
  const x = solution();
  const view = tracked.view();
  return candidates.map((candidate) => {
    const { states } = candidate;
    const a = system.slotOf(states[0]!);
    const da = system.dimensionAt(a);
    const b = states.length === 2 ? system.slotOf(states[1]!) : -1;
    const order = b < 0 ? da : da + system.dimensionAt(b);
    const covariance = new Float64Array(order * order);
    const value = new Float64Array(order);
    takeBlock(covariance, order, 0, view, a, da);
    value.set(x.subarray(system.positionOf(a), system.positionOf(a) + da));
    if (b >= 0) {
      takeBlock(covariance, order, da, view, b, order - da);
      value.set(x.subarray(system.positionOf(b), system.positionOf(b) + order - da), da);
      // The column at the other of the two: its unknowns by those of the column's state.
      const [other, at, of] = b === kept ? [a, 0, da] : [b, da, 0];
      takePair(covariance, order, view, other, at, of, order - view.across);
    }
    return judge(candidate, covariance, value);
  });
}

/** The kept block of one slot into a larger matrix of order `order`, from its diagonal entry `at` on. */
function takeBlock(target: Float64Array, order: number, at: number, { blocks, places }: KeptView, slot: number, d: number): void {
  const from = places[2 * slot]!;
  for (let j = 0; j < d; j += 1) for (let i = 0; i < d; i += 1) target[(at + j) * order + at + i] = blocks[from + j * d + i]!;
}

/** Σ of one slot and the column's state, and its mirror image: the slot's d unknowns from `at` on, the state's from `of`. */
function takePair(
  target: Float64Array,
  order: number,
  { column, lead, across, places }: KeptView,
  slot: number,
  at: number,
  of: number,
  d: number,
): void {
  const row = places[2 * slot + 1]!;
  for (let c = 0; c < across; c += 1)
    for (let i = 0; i < d; i += 1) {
      const value = column[c * lead + row + i]!;
      target[(at + i) * order + of + c] = value;
      target[(of + c) * order + at + i] = value;
    }
}

function takeFromColumn(system: System, tracked: Tracked, blocks: Blocks, hub: number, others: readonly number[]): void {
  for (const other of others) {
    const block = tracked.columnAt(system, other);
    blocks.set(other, hub, block);
    blocks.set(hub, other, transpose(block, system.dimensionAt(other)));
  }
}

function takeJoint(system: System, blocks: Blocks, a: number, b: number): void {
  const joint = jointCovariance(system, [a, b]);
  const [da, db] = [system.dimensionAt(a), system.dimensionAt(b)];
  const block = new Float64Array(da * db);
  for (let i = 0; i < da; i += 1) for (let j = 0; j < db; j += 1) block[i * db + j] = joint[i * (da + db) + da + j]!;
  blocks.set(a, b, block);
  blocks.set(b, a, transpose(block, da));
}

function transpose(block: Float64Array, rows: number): Float64Array {
  const columns = block.length / rows;
  const turned = new Float64Array(block.length);
  for (let i = 0; i < rows; i += 1) for (let j = 0; j < columns; j += 1) turned[j * rows + i] = block[i * columns + j]!;
  return turned;
}

/** @param covariance of the unknowns that the candidate reads, in its order. @param x their values. */
function judge(candidate: CheckedMeasurement, covariance: Float64Array, x: Float64Array): Evaluation {
  const { rows: m, blocks, residual, noise } = candidate;
  const n = x.length;
  const s = new Float64Array(m * m);
  const innovation = residual.slice();
  const carried = new Float64Array(m * n); // J Σ, m × n, column-major
  const row = new Float64Array(n);
  for (let q = 0; q < m; q += 1) {
    let u = 0;
    let predicted = 0;
    for (const block of blocks)
      for (let p = q; p < block.length; p += m, u += 1) {
        row[u] = block[p]!;
        predicted += block[p]! * x[u]!;
      }
    innovation[q]! -= predicted;
    for (let v = 0; v < n; v += 1) {
      let sum = 0;
      for (let w = 0; w < n; w += 1) sum += row[w]! * covariance[w * n + v]!;
      carried[v * m + q] = sum;
    }
  }
  let v = 0;
  for (const block of blocks)
    for (let p = 0; p < block.length; p += m, v += 1)
      for (let q = 0; q < m; q += 1) for (let t = 0; t < m; t += 1) s[q * m + t]! += carried[v * m + q]! * block[p + t]!;
  for (let q = 0; q < m; q += 1) s[q * (m + 1)]! += 1;
  // Cholesky of the whitened S, which is the identity plus a covariance.
  const root = s.slice();
  const turned = innovation.slice();
  let gain = 0;
  let distance = 0;
  for (let j = 0; j < m; j += 1) {
    for (let k = 0; k < j; k += 1) {
      for (let i = j; i < m; i += 1) root[i * m + j]! -= root[i * m + k]! * root[j * m + k]!;
      turned[j]! -= root[j * m + k]! * turned[k]!;
    }
    const pivot = Math.sqrt(root[j * m + j]!);
    for (let i = j; i < m; i += 1) root[i * m + j]! /= pivot;
    turned[j]! /= pivot;
    gain += Math.log(pivot);
    distance += turned[j]! ** 2;
  }
  // Back in the candidate's units: B S Bᵀ with R = B Bᵀ, by columns and then by rows.
  restoreColumns(noise, m, s);
  const restored = m === 1 ? s : transpose(s, m);
  restoreColumns(noise, m, restored);
  restoreColumns(noise, m, innovation);
  return { innovation, innovationCovariance: restored, mahalanobisSquared: distance, informationGain: gain };
}
