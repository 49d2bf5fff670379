// How far a selected inverse is off, beside how far a general library's dense Cholesky inverse is off, both held against double-double.
import { factorize, SymmetricMatrix } from "../../src/index.js";
import { denseOf, inverseByCholesky } from "./dense.js";
import { EnvelopeCholesky, type LowerColumns } from "./envelope.js";
import type { orderings } from "./random-matrices.js";

/** Largest errors over the entries of the selected inverse, which are those on the pattern of L, each relative to √(Z[i, i] Z[j, j]): for a
 *  variance its relative error, for a covariance that of the correlation (covariances may be as near to zero as rounding lets them). */
export function accuracyOf(matrix: LowerColumns, ordering: (typeof orderings)[number] = "automatic") {
  const { order, columnPointers, rowIndices, values } = matrix;
  const factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }), { ordering });
  const selected = factor.selectedInverse();
  factor.dispose();
  const dense = inverseByCholesky(denseOf(matrix));
  const reference = new EnvelopeCholesky(matrix);
  const columns = Array.from({ length: order }, (_, j) => reference.inverseColumn(j).hi);
  const worst = { selected: 0, dense: 0 };
  for (let j = 0; j < order; j += 1) {
    for (let p = selected.columnPointers[j]!; p < selected.columnPointers[j + 1]!; p += 1) {
      const i = selected.rowIndices[p]!;
      const scale = Math.sqrt(columns[i]![i]! * columns[j]![j]!);
      worst.selected = Math.max(worst.selected, Math.abs(selected.values[p]! - columns[j]![i]!) / scale);
      worst.dense = Math.max(worst.dense, Math.abs(dense.get(i, j) - columns[j]![i]!) / scale);
    }
  }
  return worst;
}
