// The facade on the kernel build that the running vitest project names.
import init from "../../bindings/loader.js";
import { SymmetricMatrix } from "../../src/index.js";
import { kernelBytes } from "./kernel.js";

export const initFacade = async (): Promise<void> => {
  await init(await kernelBytes());
};

/** A random sparse positive definite matrix: a diagonal that outweighs its row (Gershgorin's theorem). */
export function randomDominant(order: number, entriesPerColumn: number, random: () => number): SymmetricMatrix {
  const rows: number[] = [];
  const columns: number[] = [];
  const values: number[] = [];
  const sums = new Float64Array(order);
  for (let j = 0; j < order; j += 1) {
    for (let k = 0; k < entriesPerColumn && j + 1 < order; k += 1) {
      const i = j + 1 + Math.floor(random() * (order - j - 1));
      const value = 2 * random() - 1;
      rows.push(i);
      columns.push(j);
      values.push(value);
      sums[i]! += Math.abs(value);
      sums[j]! += Math.abs(value);
    }
  }
  for (let j = 0; j < order; j += 1) {
    rows.push(j);
    columns.push(j);
    values.push(sums[j]! + 0.1 + random());
  }
  return SymmetricMatrix.fromTriplets(order, rows, columns, values);
}

/** The whole matrix as nested arrays, for a dense library. */
export function toDense({ order, columnPointers, rowIndices, values }: SymmetricMatrix): number[][] {
  const dense = Array.from({ length: order }, () => new Array<number>(order).fill(0));
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const i = rowIndices[p]!;
      dense[i]![j] = values[p]!;
      dense[j]![i] = values[p]!;
    }
  }
  return dense;
}

/** The error that `call` throws, or its promise rejects with; undefined when all goes well. */
export async function errorOf(call: () => unknown): Promise<unknown> {
  try {
    await call();
    return undefined;
  } catch (error) {
    return error;
  }
}
