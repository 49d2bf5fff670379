import { beforeAll, expect, test } from "vitest";
import { information } from "../../bench/families/information.js";
import { families } from "../../bench/families.js";
import { scalarFactor } from "../../bench/incremental/scalar-factor.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

test.each(["net", "heavy", "chain"] as const)("the bench's scalar factor times its transpose is the matrix: %s", (family) => {
  const matrix = information(families[family].make(60));
  const { order, columnPointers, rowIndices, values } = matrix;
  // Any order will do: states last to first, so that there is fill.
  const elimination = Int32Array.from({ length: order }, (_, k) => order - 1 - k);
  const l = scalarFactor(matrix, elimination);
  const product = new Float64Array(order * order);
  for (let j = 0; j < order; j += 1) {
    for (let p = l.columnPointers[j]!; p < l.columnPointers[j + 1]!; p += 1)
      for (let q = l.columnPointers[j]!; q < l.columnPointers[j + 1]!; q += 1)
        product[l.rowIndices[p]! * order + l.rowIndices[q]!]! += l.values[p]! * l.values[q]!;
  }
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      const [a, b] = [order - 1 - rowIndices[p]!, order - 1 - j];
      const scale = Math.sqrt(product[a * order + a]! * product[b * order + b]!);
      // Backward error of a Cholesky factor: order × ε beside the diagonals (Higham, "Accuracy and Stability", theorem 10.3).
      expect(Math.abs(product[a * order + b]! - values[p]!)).toBeLessThanOrEqual(2 * order * Number.EPSILON * scale);
    }
  }
});
