// Writes the Matrix Market exchange format (Boisvert, Pozo, Remington 1996, NISTIR 5935).
import type { LowerColumns } from "./compress.js";

/** Lines joined at a time: bounds the strings in flight. */
const LINES = 8192;

/** A lower triangle as `coordinate real symmetric`. JavaScript prints the shortest digits that read back to the same number. */
export function writeMatrixMarket({ order, columnPointers, rowIndices, values }: LowerColumns): string {
  let text = "";
  let lines = ["%%MatrixMarket matrix coordinate real symmetric", `${order} ${order} ${values.length}`];
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const value = values[p]!;
      lines.push(`${rowIndices[p]! + 1} ${j + 1} ${Object.is(value, -0) ? "-0" : value}`);
      if (lines.length === LINES) {
        text += `${lines.join("\n")}\n`;
        lines = [];
      }
    }
  }
  return lines.length > 0 ? `${text}${lines.join("\n")}\n` : text;
}
