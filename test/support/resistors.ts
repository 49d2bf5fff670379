// Graphs as networks of resistors: the Laplacian with one vertex held, and effective resistances from its inverse (Kirchhoff 1847;
// Klein, Randić, "Resistance distance", J. Math. Chem. 12, 1993).
import { type CholeskyFactor, SymmetricMatrix } from "../../src/index.js";

export interface Graph {
  readonly vertices: number;
  readonly edges: readonly (readonly [number, number])[];
}

/** Σ over edges of (e_a − e_b)(e_a − e_b)ᵀ, without the row and column of the last vertex. Unit weights unless given, one an edge. */
export function heldLaplacian({ vertices, edges }: Graph, weights?: readonly number[]): SymmetricMatrix {
  const held = vertices - 1;
  const [rows, columns, values]: number[][] = [[], [], []];
  for (const [k, [a, b]] of edges.entries()) {
    const weight = weights?.[k] ?? 1;
    for (const [i, j, v] of [
      [a, a, weight],
      [b, b, weight],
      [Math.max(a, b), Math.min(a, b), -weight],
    ] as const) {
      if (i === held || j === held) continue;
      rows!.push(i);
      columns!.push(j);
      values!.push(v);
    }
  }
  return SymmetricMatrix.fromTriplets(held, rows!, columns!, values!);
}

/** R(a, b) = Z[a, a] + Z[b, b] − 2 Z[a, b], Z the inverse of the held Laplacian, zero at the held vertex. */
export function resistances(factor: CholeskyFactor, pairs: readonly (readonly [number, number])[]): number[] {
  const held = factor.order;
  const diagonal = factor.inverseDiagonal();
  const inner = pairs.flatMap(([a, b], k) => (a !== held && b !== held ? [{ a, b, k }] : []));
  const entries = factor.inverseEntries(
    inner.map(({ a }) => a),
    inner.map(({ b }) => b),
  );
  const result = pairs.map(([a, b]) => (diagonal[a] ?? 0) + (diagonal[b] ?? 0));
  for (const [at, { k }] of inner.entries()) result[k]! -= 2 * entries[at]!;
  return result;
}

export function gridGraph(rows: number, columns: number): Graph {
  const edges: [number, number][] = [];
  for (let i = 0; i < rows; i += 1) {
    for (let j = 0; j < columns; j += 1) {
      if (j + 1 < columns) edges.push([i * columns + j, i * columns + j + 1]);
      if (i + 1 < rows) edges.push([i * columns + j, (i + 1) * columns + j]);
    }
  }
  return { vertices: rows * columns, edges };
}
