// The information matrix Σ Jᵀ R⁻¹ J of a stream, lower triangle by columns, rows ascending.
import type { Stream } from "./stream.js";

export interface Information {
  readonly order: number;
  /** Length order + 1. */
  readonly columnPointers: Int32Array;
  /** Ascending in each column, the diagonal entry first. */
  readonly rowIndices: Int32Array;
  readonly values: Float64Array;
  /** Dimension of each state: consecutive unknowns that share one pattern. */
  readonly blockSizes: Int32Array;
  /** Σ Jᵀ R⁻¹ r, the right-hand side of the normal equations. */
  readonly vector: Float64Array;
}

/** The matrix after the first `steps` steps (all of them unless told). */
export function information(stream: Stream, steps: number = stream.steps): Information {
  const end = steps === 0 ? undefined : stream.step(steps - 1);
  const blocks = end?.lastState ?? 0;
  const measurements = end?.lastMeasurement ?? 0;
  const blockSizes = Int32Array.from({ length: blocks }, (_, s) => stream.dimension(s));
  const start = new Int32Array(blocks + 1);
  for (let s = 0; s < blocks; s += 1) start[s + 1] = start[s]! + blockSizes[s]!;
  const order = start[blocks]!;

  // Neighbours of each state with a larger index, ascending.
  const later: number[][] = Array.from({ length: blocks }, () => []);
  for (let k = 0; k < measurements; k += 1) {
    const { states } = stream.measurement(k);
    for (const a of states) for (const b of states) if (a > b) later[b]!.push(a);
  }
  const neighbours = later.map((list) => [...new Set(list)].sort((a, b) => a - b));

  const columnPointers = new Int32Array(order + 1);
  for (let b = 0; b < blocks; b += 1) {
    const below = neighbours[b]!.reduce((sum, a) => sum + blockSizes[a]!, 0);
    for (let c = 0; c < blockSizes[b]!; c += 1) {
      const j = start[b]! + c;
      columnPointers[j + 1] = columnPointers[j]! + blockSizes[b]! - c + below;
    }
  }
  const rowIndices = new Int32Array(columnPointers[order]!);
  const values = new Float64Array(columnPointers[order]!);
  /** Rows of the block (a, b) begin this far into the off-diagonal part of each column of b. */
  const offsets = neighbours.map((list) => {
    const offset = new Map<number, number>();
    let rows = 0;
    for (const a of list) {
      offset.set(a, rows);
      rows += blockSizes[a]!;
    }
    return offset;
  });
  for (let b = 0; b < blocks; b += 1) {
    for (let c = 0; c < blockSizes[b]!; c += 1) {
      const j = start[b]! + c;
      let p = columnPointers[j]!;
      for (let i = j; i < start[b + 1]!; i += 1) rowIndices[p++] = i;
      for (const a of neighbours[b]!) for (let i = start[a]!; i < start[a + 1]!; i += 1) rowIndices[p++] = i;
    }
  }

  const vector = new Float64Array(order);
  for (let k = 0; k < measurements; k += 1) {
    const { states, jacobians, residual, standardDeviations } = stream.measurement(k);
    for (const [u, a] of states.entries()) {
      const rowsOfA = blockSizes[a]!;
      const left = jacobians[u]!;
      for (let r = 0; r < residual.length; r += 1) {
        const scaled = residual[r]! / standardDeviations[r]! ** 2;
        for (let i = 0; i < rowsOfA; i += 1) vector[start[a]! + i]! += left[r * rowsOfA + i]! * scaled;
      }
      for (const [v, b] of states.entries()) {
        if (a < b) continue;
        const columnsOfB = blockSizes[b]!;
        const right = jacobians[v]!;
        for (let c = 0; c < columnsOfB; c += 1) {
          const j = start[b]! + c;
          const first = a === b ? c : 0;
          const to = columnPointers[j]! + (a === b ? 0 : columnsOfB - c + offsets[b]!.get(a)!);
          for (let i = first; i < rowsOfA; i += 1) {
            let sum = 0;
            for (let r = 0; r < residual.length; r += 1)
              sum += (left[r * rowsOfA + i]! * right[r * columnsOfB + c]!) / standardDeviations[r]! ** 2;
            values[to + i - first]! += sum;
          }
        }
      }
    }
  }
  return { order, columnPointers, rowIndices, values, blockSizes, vector };
}
