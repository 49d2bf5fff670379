// The information matrix Σ Jᵀ R⁻¹ J and vector Σ Jᵀ R⁻¹ r of whitened rows, by blocks of states.
import type { WhitenedRows } from "./whitened.js";

/** Lower triangle by columns, rows ascending, the diagonal first; every state's block is whole. */
export interface Information {
  readonly order: number;
  readonly columnPointers: Int32Array;
  readonly rowIndices: Int32Array;
  readonly values: Float64Array;
  /** Unknowns of each state, in the order given. */
  readonly blockSizes: Int32Array;
  readonly vector: Float64Array;
}

/** Sums up `rows` over the states 0 … sizes.length − 1; `place` gives each state id its number there.
 *  Cost: O(pairs of states in one measurement), with counting sorts, and their block products. */
export function assembleInformation(sizes: Int32Array, place: (state: number) => number, rows: readonly WhitenedRows[]): Information {
  const states = sizes.length;
  const first = new Int32Array(states + 1);
  for (let s = 0; s < states; s += 1) first[s + 1] = first[s]! + sizes[s]!;
  const order = first[states]!;

  // Pairs (lower-numbered, higher-numbered) of states read together, bucketed by the lower one.
  let pairs = 0;
  for (const { states: of } of rows) pairs += (of.length * (of.length + 1)) / 2;
  const low = new Int32Array(pairs);
  const high = new Int32Array(pairs);
  const bucket = new Int32Array(states + 1);
  let at = 0;
  for (const { states: of } of rows) {
    for (let a = 0; a < of.length; a += 1) {
      const pa = place(of[a]!);
      for (let b = 0; b <= a; b += 1) {
        const pb = place(of[b]!);
        low[at] = Math.min(pa, pb);
        high[at] = Math.max(pa, pb);
        bucket[low[at]! + 1]! += 1;
        at += 1;
      }
    }
  }
  for (let s = 0; s < states; s += 1) bucket[s + 1]! += bucket[s]!;
  const sorted = new Int32Array(pairs);
  const fill = bucket.slice();
  for (let p = 0; p < pairs; p += 1) {
    const s = low[p]!;
    sorted[fill[s]!] = p;
    fill[s]! += 1;
  }

  // Distinct neighbours of each state with a larger number, ascending, and where each pair's block begins below the diagonal block.
  const offset = new Int32Array(pairs);
  const under = new Int32Array(states);
  const seen = new Int32Array(states).fill(-1);
  const spot = new Int32Array(states);
  const neighbours: number[][] = [];
  for (let s = 0; s < states; s += 1) {
    const list: number[] = [];
    for (let p = bucket[s]!; p < bucket[s + 1]!; p += 1) {
      const h = high[sorted[p]!]!;
      if (h === s || seen[h] === s) continue;
      seen[h] = s;
      list.push(h);
    }
    list.sort((a, b) => a - b);
    let below = 0;
    for (const h of list) {
      spot[h] = below;
      below += sizes[h]!;
    }
    under[s] = below;
    neighbours.push(list);
    for (let p = bucket[s]!; p < bucket[s + 1]!; p += 1) offset[sorted[p]!] = spot[high[sorted[p]!]!]!;
  }

  const columnPointers = new Int32Array(order + 1);
  for (let s = 0; s < states; s += 1) {
    for (let t = 0; t < sizes[s]!; t += 1) columnPointers[first[s]! + t + 1] = columnPointers[first[s]! + t]! + sizes[s]! - t + under[s]!;
  }
  const nonzeros = columnPointers[order]!;
  const rowIndices = new Int32Array(nonzeros);
  for (let s = 0; s < states; s += 1) {
    for (let t = 0; t < sizes[s]!; t += 1) {
      let p = columnPointers[first[s]! + t]!;
      for (let u = t; u < sizes[s]!; u += 1) rowIndices[p++] = first[s]! + u;
      for (const h of neighbours[s]!) for (let u = 0; u < sizes[h]!; u += 1) rowIndices[p++] = first[h]! + u;
    }
  }

  const values = new Float64Array(nonzeros);
  const vector = new Float64Array(order);
  at = 0;
  for (const { states: of, blocks, rows: m, residual } of rows) {
    for (let a = 0; a < of.length; a += 1) {
      const pa = place(of[a]!);
      const blockA = blocks[a]!;
      for (let u = 0; u < sizes[pa]!; u += 1) {
        let sum = 0;
        for (let q = 0; q < m; q += 1) sum += blockA[u * m + q]! * residual[q]!;
        vector[first[pa]! + u]! += sum;
      }
      for (let b = 0; b <= a; b += 1) {
        const pb = place(of[b]!);
        const swap = pa < pb;
        const columnState = swap ? pa : pb;
        addBlock(
          values,
          columnPointers,
          first[columnState]!,
          sizes[columnState]!,
          pa === pb ? -1 : offset[at]!,
          swap ? blockA : blocks[b]!,
          swap ? blocks[b]! : blockA,
          m,
        );
        at += 1;
      }
    }
  }
  return { order, columnPointers, rowIndices, values, blockSizes: sizes, vector };
}

/** Adds rowBlockᵀ columnBlock at `offset` below the diagonal block of the columns from `firstColumn`; offset −1: the lower triangle of
 *  the diagonal block itself. */
function addBlock(
  values: Float64Array,
  columnPointers: Int32Array,
  firstColumn: number,
  width: number,
  offset: number,
  columnBlock: Float64Array,
  rowBlock: Float64Array,
  m: number,
): void {
  const height = rowBlock.length / m;
  for (let t = 0; t < width; t += 1) {
    const from = offset < 0 ? t : 0;
    let p = columnPointers[firstColumn + t]! + (offset < 0 ? 0 : width - t + offset);
    for (let u = from; u < height; u += 1) {
      let sum = 0;
      for (let q = 0; q < m; q += 1) sum += rowBlock[u * m + q]! * columnBlock[t * m + q]!;
      values[p]! += sum;
      p += 1;
    }
  }
}
