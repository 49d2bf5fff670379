// What candidates would tell if they were added: innovation covariance, Mahalanobis distance, information gain; nothing is changed.
import { crossBlocks, eachMarginal, jointCovariance } from "./marginals.js";
import { restoreColumns } from "./noise.js";
import type { CheckedMeasurement } from "./rows.js";
import type { System } from "./system.js";
import type { Tracked } from "./tracked.js";

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
  return candidates.map((candidate) => judge(system, candidate, blocks, values));
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

function judge(system: System, candidate: CheckedMeasurement, blocks: Blocks, values: Map<number, Float64Array>): Evaluation {
  const { rows: m, states, blocks: jacobians, residual, noise } = candidate;
  const slots = states.map((state) => system.slotOf(state));
  const s = new Float64Array(m * m);
  const innovation = residual.slice();
  for (let q = 0; q < m; q += 1) s[q * m + q] = 1;
  for (const [a, slotA] of slots.entries()) {
    const ja = jacobians[a]!;
    const da = system.dimensionAt(slotA);
    const x = values.get(slotA)!;
    for (let u = 0; u < da; u += 1) for (let q = 0; q < m; q += 1) innovation[q]! -= ja[u * m + q]! * x[u]!;
    for (const [b, slotB] of slots.entries()) {
      const jb = jacobians[b]!;
      const db = system.dimensionAt(slotB);
      const sigma = blocks.get(slotA, slotB);
      for (let q = 0; q < m; q += 1) {
        for (let v = 0; v < db; v += 1) {
          let sum = 0;
          for (let u = 0; u < da; u += 1) sum += ja[u * m + q]! * sigma[u * db + v]!;
          for (let p = 0; p < m; p += 1) s[q * m + p]! += sum * jb[v * m + p]!;
        }
      }
    }
  }
  // Cholesky of the whitened S, which is the identity plus a covariance.
  const root = s.slice();
  const carried = innovation.slice();
  let gain = 0;
  let distance = 0;
  for (let j = 0; j < m; j += 1) {
    for (let k = 0; k < j; k += 1) {
      for (let i = j; i < m; i += 1) root[i * m + j]! -= root[i * m + k]! * root[j * m + k]!;
      carried[j]! -= root[j * m + k]! * carried[k]!;
    }
    const pivot = Math.sqrt(root[j * m + j]!);
    for (let i = j; i < m; i += 1) root[i * m + j]! /= pivot;
    carried[j]! /= pivot;
    gain += Math.log(pivot);
    distance += carried[j]! ** 2;
  }
  // Back in the candidate's units: B S Bᵀ with R = B Bᵀ, by columns and then by rows.
  restoreColumns(noise, m, s);
  const turned = transpose(s, m);
  restoreColumns(noise, m, turned);
  restoreColumns(noise, m, innovation);
  return { innovation, innovationCovariance: turned, mahalanobisSquared: distance, informationGain: gain };
}
