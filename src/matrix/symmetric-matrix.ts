import { NotSquareError } from "../errors.js";
import { finiteNumbersOf, indicesOf, requireIndex, requireKnownOptions, requireLength, requireWord } from "../support/checks.js";
import type { LowerColumns } from "./compress.js";
import { type MatrixMarketColumns, readMatrixMarket } from "./matrix-market-reader.js";
import { writeMatrixMarket } from "./matrix-market-writer.js";
import { normalEquations } from "./normal-equations.js";
import { columnsOfEntries, pointersOf, type SparseColumns } from "./sparse-columns.js";
import { lowerTriangle, type Triangle, triangles } from "./triangles.js";

/** Largest order and number of entries: indices are 32-bit. */
const LARGEST = 0x7fffffff;

/** Checks that what a file holds is symmetric, and keeps its lower triangle. */
function symmetricFrom(file: MatrixMarketColumns): LowerColumns {
  const { rows, columns: order, columnPointers, rowIndices, values } = file;
  if (rows !== order) throw new NotSquareError(rows, order);
  if (file.symmetric) return { order, columnPointers, rowIndices, values };
  return lowerTriangle(order, rowIndices, columnsOfEntries(columnPointers), values, "full");
}

/**
 * A symmetric matrix, kept as its lower triangle in compressed sparse columns: the entries of column j are
 * `rowIndices[p]`, `values[p]` for p from `columnPointers[j]` up to `columnPointers[j + 1]`, rows ascending from the diagonal down.
 * It lives in JavaScript memory and needs no `dispose`. Entries whose value is zero stay in the pattern.
 *
 * Every `from…` copies its input and leaves it as it was. Duplicates add up, in the order given. Order 0 is allowed.
 */
export class SymmetricMatrix {
  /** Number of rows and columns: the unknowns. */
  readonly order: number;
  /** Int32Array[order + 1]. Read only: writing to the arrays breaks what the matrix promises. */
  readonly columnPointers: Int32Array;
  /** Int32Array[nonzeros]. Read only. */
  readonly rowIndices: Int32Array;
  /** Float64Array[nonzeros]. Read only. */
  readonly values: Float64Array;

  private constructor({ order, columnPointers, rowIndices, values }: LowerColumns) {
    this.order = order;
    this.columnPointers = columnPointers;
    this.rowIndices = rowIndices;
    this.values = values;
  }

  /** Entries of the lower triangle, the diagonal included. */
  get nonzeros(): number {
    return this.values.length;
  }

  /** Takes over arrays that are in order already. @internal */
  static adopt(columns: LowerColumns): SymmetricMatrix {
    return new SymmetricMatrix(columns);
  }

  /**
   * From compressed columns; rows within a column in any order.
   * @param input columnPointers of length order + 1, from 0, never falling; rowIndices and values of length `columnPointers[order]`.
   *   triangle: which half the entries are, `"lower"` by default; `"full"` when both halves are there, which must agree to about 1e-10
   *   (the lower one is kept).
   * @throws {LengthError | IndexRangeError | NotFiniteError | WrongTriangleError | NotSymmetricError | OptionError}
   * Cost: O(order + entries).
   */
  static fromColumns(input: {
    order: number;
    columnPointers: ArrayLike<number>;
    rowIndices: ArrayLike<number>;
    values: ArrayLike<number>;
    triangle?: Triangle | undefined;
  }): SymmetricMatrix {
    requireKnownOptions("fromColumns", input, ["order", "columnPointers", "rowIndices", "values", "triangle"]);
    const { order, triangle = "lower" } = input;
    requireIndex("order", order, 0, LARGEST);
    requireWord("triangle", triangle, triangles);
    const columnPointers = pointersOf(input.columnPointers, order, input.rowIndices.length);
    requireLength("values", input.values.length, input.rowIndices.length);
    const rowIndices = indicesOf("rowIndices", input.rowIndices, 0, order - 1);
    const columns = columnsOfEntries(columnPointers);
    const values = finiteNumbersOf("values", input.values, (p) => ` (row ${rowIndices[p]}, column ${columns[p]})`);
    return new SymmetricMatrix(lowerTriangle(order, rowIndices, columns, values, triangle));
  }

  /**
   * From entries (rows[k], columns[k], values[k]) in any order, counting from 0; entries at the same place add up.
   * @param options triangle: which half the entries are, `"lower"` by default (row ≥ column); `"full"` when both halves are there.
   * @throws {LengthError | IndexRangeError | NotFiniteError | WrongTriangleError | NotSymmetricError | OptionError}
   * Cost: O(order + entries).
   */
  static fromTriplets(
    order: number,
    rows: ArrayLike<number>,
    columns: ArrayLike<number>,
    values: ArrayLike<number>,
    options: { triangle?: Triangle | undefined } = {},
  ): SymmetricMatrix {
    requireKnownOptions("fromTriplets", options, ["triangle"]);
    const { triangle = "lower" } = options;
    requireIndex("order", order, 0, LARGEST);
    requireWord("triangle", triangle, triangles);
    requireLength("columns", columns.length, rows.length);
    requireLength("values", values.length, rows.length);
    const i = indicesOf("rows", rows, 0, order - 1);
    const j = indicesOf("columns", columns, 0, order - 1);
    const v = finiteNumbersOf("values", values, (k) => ` (row ${i[k]}, column ${j[k]})`);
    return new SymmetricMatrix(lowerTriangle(order, i, j, v, triangle));
  }

  /**
   * From a text in the Matrix Market exchange format (Boisvert, Pozo, Remington 1996, NISTIR 5935): coordinate or array; real, integer or
   * pattern (all ones); symmetric, or general when both halves are there and agree.
   * @throws {MatrixMarketError} with the line.  @throws {NotSquareError | NotSymmetricError}
   */
  static fromMatrixMarket(text: string): SymmetricMatrix {
    return new SymmetricMatrix(symmetricFrom(readMatrixMarket(text)));
  }

  /**
   * JᵀWJ, the information matrix of measurements with Jacobian J and weights W = diag(weights).
   * @param jacobian rows × columns; entries at the same place add up.
   * @param weights length rows, one over each measurement's variance; all 1 by default.
   * @throws {LengthError | IndexRangeError | NotFiniteError | NegativeWeightError}
   * Cost: Σ over rows of (entries)² multiplications. A column of J without an entry gives a column without an entry.
   */
  static fromNormalEquations(jacobian: SparseColumns, weights?: ArrayLike<number>): SymmetricMatrix {
    return new SymmetricMatrix(normalEquations(jacobian, weights));
  }

  /** The lower triangle in the Matrix Market exchange format (coordinate real symmetric), digits such that reading gives the same bits. */
  toMatrixMarket(): string {
    return writeMatrixMarket(this);
  }
}
