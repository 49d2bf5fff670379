// What a caller calls the entries of a symmetric matrix (its lower half, its upper half, both) brought to the lower triangle.
import { NotSymmetricError, WrongTriangleError } from "../errors.js";
import { compressEntries, type LowerColumns } from "./compress.js";

export type Triangle = "lower" | "upper" | "full";
export const triangles: readonly Triangle[] = ["lower", "upper", "full"];

/** How far mirror images may differ, relative to the larger of the two and to the geometric mean of their diagonal entries: products such
 *  as JᵀWJ come with rounding errors of about (rows per unknown) × 1.1e-16 of that mean. */
const SYMMETRY_TOLERANCE = 1e-10;

/** rows, columns: whole numbers in [0, order). */
export function lowerTriangle(
  order: number,
  rows: Int32Array,
  columns: Int32Array,
  values: Float64Array,
  triangle: Triangle,
): LowerColumns {
  if (triangle === "full") return lowerOfBoth(order, rows, columns, values);
  const isUpper = triangle === "upper";
  for (let p = 0; p < values.length; p += 1) {
    if (isUpper ? rows[p]! > columns[p]! : rows[p]! < columns[p]!) throw new WrongTriangleError(p, rows[p]!, columns[p]!, triangle);
  }
  const compressed = isUpper ? compressEntries(order, order, columns, rows, values) : compressEntries(order, order, rows, columns, values);
  return { order, ...compressed };
}

/** Entries p of the whole matrix for which `keep` holds, compressed. */
function half(order: number, rows: Int32Array, columns: Int32Array, values: Float64Array, keep: (p: number) => boolean): LowerColumns {
  const kept = Int32Array.from(values.keys()).filter(keep);
  const compressed = compressEntries(
    order,
    order,
    kept.map((p) => rows[p]!),
    kept.map((p) => columns[p]!),
    Float64Array.from(kept, (p) => values[p]!),
  );
  return { order, ...compressed };
}

function lowerOfBoth(order: number, rows: Int32Array, columns: Int32Array, values: Float64Array): LowerColumns {
  const lower = half(order, rows, columns, values, (p) => rows[p]! >= columns[p]!);
  const upper = half(order, columns, rows, values, (p) => rows[p]! <= columns[p]!);
  const diagonal = new Float64Array(order);
  for (let j = 0; j < order; j += 1) {
    const p = lower.columnPointers[j]!;
    if (p < lower.columnPointers[j + 1]! && lower.rowIndices[p] === j) diagonal[j] = Math.abs(lower.values[p]!);
  }
  for (let j = 0; j < order; j += 1) {
    let p = lower.columnPointers[j]!;
    let q = upper.columnPointers[j]!;
    const lastP = lower.columnPointers[j + 1]!;
    const lastQ = upper.columnPointers[j + 1]!;
    while (p < lastP || q < lastQ) {
      const rowP = p < lastP ? lower.rowIndices[p]! : order;
      const rowQ = q < lastQ ? upper.rowIndices[q]! : order;
      const row = Math.min(rowP, rowQ);
      const below = rowP === row ? lower.values[p]! : 0;
      const above = rowQ === row ? upper.values[q]! : 0;
      const scale = Math.max(Math.abs(below), Math.abs(above), Math.sqrt(diagonal[row]! * diagonal[j]!));
      if (Math.abs(below - above) > SYMMETRY_TOLERANCE * scale) throw new NotSymmetricError(row, j, below, above);
      if (rowP === row) p += 1;
      if (rowQ === row) q += 1;
    }
  }
  return lower;
}
