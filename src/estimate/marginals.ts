// Blocks of Σ on demand, by forward solves over the reach: nothing is kept, nothing of the size of the whole is touched.
import type { System } from "./system.js";

/** Columns carried forward in one pass: their product is square in this. */
const PASS = 48;

/** The joint covariance of states in `slots`, row-major, in the order given. Cost: one forward pass over their reach. */
export function jointCovariance(system: System, slots: readonly number[]): Float64Array {
  let columns = 0;
  const firsts = slots.map((slot) => {
    const first = columns;
    columns += system.dimensionAt(slot);
    return first;
  });
  system.begin(columns);
  slots.forEach((slot, k) => {
    system.loadUnits(firsts[k]!, slot);
  });
  system.forward();
  const gram = system.gram(columns);
  system.clear();
  return gram;
}

/** The covariance block of each state and its value, several states a pass. `take` gets the slot, its block and its part of x. */
export function eachMarginal(
  system: System,
  slots: readonly number[],
  take: (k: number, block: Float64Array, value: Float64Array) => void,
): void {
  for (let from = 0; from < slots.length; ) {
    let to = from;
    let columns = 0;
    while (to < slots.length && (to === from || columns + system.dimensionAt(slots[to]!) <= PASS)) {
      columns += system.dimensionAt(slots[to]!);
      to += 1;
    }
    system.begin(columns);
    for (let k = from, first = 0; k < to; first += system.dimensionAt(slots[k]!), k += 1) system.loadUnits(first, slots[k]!);
    system.forward();
    const gram = system.gram(columns);
    const values = system.values(columns);
    system.clear();
    for (let k = from, first = 0; k < to; k += 1) {
      const d = system.dimensionAt(slots[k]!);
      const block = new Float64Array(d * d);
      for (let j = 0; j < d; j += 1) for (let i = 0; i < d; i += 1) block[j * d + i] = gram[(first + j) * columns + first + i]!;
      take(k, block, values.slice(first, first + d));
      first += d;
    }
    from = to;
  }
}

/** Σ[slots, hub]: for each slot its dimension × the hub's, row-major. Cost: one forward pass, one backward pass over the ancestors of
 *  the slots. */
export function crossBlocks(system: System, hub: number, slots: readonly number[]): Float64Array[] {
  const across = system.dimensionAt(hub);
  system.begin(across);
  system.loadUnits(0, hub);
  system.forward();
  system.backTo(slots);
  const blocks = slots.map((slot) => system.columnsAt(slot, across));
  system.clear();
  return blocks;
}

/** The block column of Σ at one slot: its dimension side by side for each position. Cost: one forward and one backward solve. */
export function wholeColumn(system: System, slot: number): Float64Array {
  const across = system.dimensionAt(slot);
  system.begin(across);
  system.loadUnits(0, slot);
  system.forward();
  system.back();
  const column = system.columns(across);
  system.clear();
  return column;
}
