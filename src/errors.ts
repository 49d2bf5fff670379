// Every error a caller can meet, in the caller's numbering and names.
import { SigmatideError } from "../bindings/errors.js";

export { DisposedError, KernelLoadError, MemoryLimitError, NotInitializedError, SigmatideError } from "../bindings/errors.js";

/** An index, size or pointer that is not a whole number in its range. */
export class IndexRangeError extends SigmatideError {
  /** @param what the offending element as a caller would write it, such as `rowIndices[7]`. */
  constructor(what: string, value: unknown, lowest: number, highest: number) {
    super("INDEX_RANGE", `${what} is ${String(value)}; it must be a whole number from ${lowest} to ${highest} (counting from 0).`, {
      what,
      value,
      lowest,
      highest,
    });
  }
}

/** An array, or a sum of sizes, that does not fit the rest. */
export class LengthError extends SigmatideError {
  constructor(what: string, length: number, expected: number) {
    super("LENGTH", `${what} is ${length}; it must be ${expected}.`, { what, length, expected });
  }
}

/** NaN or an infinity: the first one. */
export class NotFiniteError extends SigmatideError {
  /** @param what the array's name, and what the element stands for where that is known. */
  constructor(what: string, position: number, value: number, where = "") {
    super("NOT_FINITE", `${what}[${position}]${where} is ${value}: every number must be finite. Mend or leave out that entry.`, {
      what,
      position,
      value,
    });
  }
}

/** An entry on the other side of the diagonal than the input promised. */
export class WrongTriangleError extends SigmatideError {
  constructor(position: number, row: number, column: number, triangle: "lower" | "upper") {
    super(
      "WRONG_TRIANGLE",
      `Entry ${position} (row ${row}, column ${column}) is not in the ${triangle} triangle: leave it out if its mirror image is given, ` +
        `or say triangle: "full" when both halves are.`,
      { position, row, column, triangle },
    );
  }
}

/** Both halves were given, and they differ. */
export class NotSymmetricError extends SigmatideError {
  constructor(row: number, column: number, value: number, mirrored: number) {
    super(
      "NOT_SYMMETRIC",
      `The entry at row ${row}, column ${column} is ${value}, its mirror image at row ${column}, column ${row} is ${mirrored}: ` +
        `a symmetric matrix is needed. Give one half alone, or for a design matrix A its normal equations AᵀA.`,
      { row, column, value, mirrored },
    );
  }
}

export class NotSquareError extends SigmatideError {
  constructor(rows: number, columns: number) {
    super(
      "NOT_SQUARE",
      `The matrix has ${rows} rows and ${columns} columns; a symmetric matrix is square. Take a design matrix through fromNormalEquations.`,
      { rows, columns },
    );
  }
}

/** An unknown that no entry of the matrix touches. */
export class EmptyColumnError extends SigmatideError {
  constructor(column: number) {
    super(
      "EMPTY_COLUMN",
      `Column ${column} has no entry: nothing says anything about that unknown. Add a measurement or a prior on it, or leave it out.`,
      {
        column,
      },
    );
  }
}

/** The matrix is not positive definite, or so close to it that f64 cannot tell. */
export class NotPositiveDefiniteError extends SigmatideError {
  constructor(
    /** The unknown at which elimination stopped, in the caller's numbering. */
    readonly column: number,
    /** What was left of its diagonal entry. */
    readonly pivot: number,
  ) {
    super(
      "NOT_POSITIVE_DEFINITE",
      `Cholesky pivot ${pivot.toExponential(3)} at column ${column} is not safely positive: given the unknowns before it, no row fixes that ` +
        `unknown, or a weight is negative. Check the rows that touch column ${column}, or add a prior on it.`,
      { column, pivot },
    );
  }
}

/** Measurement rows do not determine an unknown, or so weakly that f64 cannot tell. */
export class RankDeficientError extends SigmatideError {
  constructor(
    /** The unknown at which elimination stopped, in the caller's numbering. */
    readonly column: number,
    /** What the rows tell of it once the unknowns eliminated before it are free to follow: its diagonal entry of R. */
    readonly remaining: number,
    /** The norm of its column of √W J. */
    readonly size: number,
  ) {
    super(
      "RANK_DEFICIENT",
      `The rows do not determine the unknown of column ${column}: given those before it ${remaining.toExponential(3)} is left of a column of size ` +
        `${size.toExponential(3)}, which is rounding noise. Add a row or a prior that fixes it.`,
      { column, remaining, size },
    );
  }
}

/** Fewer rows that count than unknowns. */
export class TooFewRowsError extends SigmatideError {
  constructor(rows: number, columns: number) {
    super("TOO_FEW_ROWS", `${rows} rows with a weight cannot determine ${columns} unknowns: add rows or priors, or leave unknowns out.`, {
      rows,
      columns,
    });
  }
}

/** A measurement row that touches no unknown. */
export class EmptyRowError extends SigmatideError {
  constructor(row: number) {
    super("EMPTY_ROW", `Row ${row} has no entry: it says nothing about any unknown. Leave it out, or give it the weight 0.`, { row });
  }
}

/** A column of a Jacobian so large or small that products with it could leave the range of f64. */
export class ColumnRangeError extends SigmatideError {
  constructor(column: number, square: number) {
    super(
      "COLUMN_RANGE",
      `The squares of column ${column} of the weighted rows add up to ${square}, outside of 1e-270 to 1e270: take another unit for that unknown.`,
      { column, square },
    );
  }
}

/** `refactor` was called on a factor that never was a matrix's. */
export class RowFactorError extends SigmatideError {
  constructor() {
    super(
      "ROW_FACTOR",
      "This factor was made of measurement rows by the orthogonal route, and refactor takes a matrix: call factorizeRows with the new rows.",
    );
  }
}

export class NegativeWeightError extends SigmatideError {
  constructor(row: number, weight: number) {
    super("NEGATIVE_WEIGHT", `weights[${row}] is ${weight}: a weight is one over a variance, so zero or more.`, { row, weight });
  }
}

/** An elimination order that leaves an unknown out and names another twice. */
export class NotAPermutationError extends SigmatideError {
  constructor(what: string, value: number, first: number, second: number) {
    super("NOT_A_PERMUTATION", `${what} names ${value} twice, at ${first} and ${second}: it must name every unknown once.`, {
      what,
      value,
      first,
      second,
    });
  }
}

/** `refactor` was given a matrix whose entries stand elsewhere. */
export class PatternMismatchError extends SigmatideError {
  constructor(why: string, details: Record<string, unknown>) {
    super("PATTERN_MISMATCH", `${why}: refactor takes new values on the same pattern alone. Call factorize for a new pattern.`, details);
  }
}

/** A change was asked of an object that an asynchronous call is still reading. */
export class BusyError extends SigmatideError {
  constructor(what: string) {
    super(
      "BUSY",
      `An asynchronous call on this ${what} is still running: await it, or abort it by its signal, before changing the ${what}.`,
      { what },
    );
  }
}

/** An option that does not exist, or a value it does not take. */
export class OptionError extends SigmatideError {
  constructor(message: string, details: Record<string, unknown>) {
    super("OPTION", message, details);
  }
}

/** Text that is not Matrix Market, by line. */
export class MatrixMarketError extends SigmatideError {
  constructor(
    /** Line number, counting from 1. */
    readonly line: number,
    readonly expected: string,
    found: string,
  ) {
    super("MATRIX_MARKET", `Line ${line}: expected ${expected}, found ${found}.`, { line, expected, found });
  }
}
