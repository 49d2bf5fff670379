// What an estimate refuses, each with the offending value and the mend.
import { SigmatideError } from "../errors.js";

/** A measurement as messages name it. */
const called = (name: string | undefined): string => (name === undefined ? "the measurement" : `measurement "${name}"`);

/** A part of a measurement whose size does not fit the rest: a Jacobian, the residual's covariance, the lists themselves. */
export class MeasurementShapeError extends SigmatideError {
  constructor(
    /** The part as a caller would write it, such as `jacobians[1]`. */
    readonly part: string,
    found: string,
    expected: string,
    readonly measurement?: string,
  ) {
    super("MEASUREMENT_SHAPE", `${part} of ${called(measurement)} is ${found}; it must be ${expected}.`, {
      part,
      found,
      expected,
      measurement,
    });
  }
}

/** A measurement that reads no state, or has no row. */
export class EmptyMeasurementError extends SigmatideError {
  constructor(
    readonly part: "states" | "residual",
    readonly measurement?: string,
  ) {
    const mend = part === "states" ? "name at least one state that it reads" : "give one number a row, or leave the measurement out";
    super("EMPTY_MEASUREMENT", `${part} of ${called(measurement)} is empty: ${mend}.`, { part, measurement });
  }
}

/** NaN or an infinity in a measurement. */
export class MeasurementNotFiniteError extends SigmatideError {
  constructor(
    /** The entry as a caller would write it, such as `jacobians[0], row 1, column 2`. */
    readonly entry: string,
    readonly value: number,
    readonly measurement?: string,
  ) {
    super(
      "MEASUREMENT_NOT_FINITE",
      `${entry} of ${called(measurement)} is ${value}: every number must be finite. Mend or leave out that row.`,
      {
        entry,
        value,
        measurement,
      },
    );
  }
}

/** A state that was never added, or that was forgotten. */
export class UnknownStateError extends SigmatideError {
  constructor(
    readonly state: unknown,
    where: string,
  ) {
    super(
      "UNKNOWN_STATE",
      `${where} names state ${String(state)}, which was never added, or was forgotten: use an id that addState gave.`,
      {
        state,
        where,
      },
    );
  }
}

/** Noise given in no form, or in more than one. */
export class NoiseFormError extends SigmatideError {
  constructor(
    readonly given: readonly string[],
    readonly measurement?: string,
  ) {
    const found = given.length === 0 ? "gives no noise" : `gives its noise as ${given.join(" and as ")}`;
    super("NOISE_FORM", `${called(measurement)} ${found}: give exactly one of covariance, standardDeviations and information.`, {
      given: [...given],
      measurement,
    });
  }
}

/** A standard deviation that is zero or negative. */
export class StandardDeviationError extends SigmatideError {
  constructor(
    readonly row: number,
    readonly value: number,
    readonly measurement?: string,
  ) {
    super(
      "STANDARD_DEVIATION",
      `standardDeviations[${row}] of ${called(measurement)} is ${value}: it must be greater than zero. A reading without error is not taken; ` +
        "give the smallest deviation that its use can bear.",
      { row, value, measurement },
    );
  }
}

/** A covariance or information matrix of noise whose mirror images differ. */
export class NoiseNotSymmetricError extends SigmatideError {
  constructor(
    readonly form: "covariance" | "information",
    readonly row: number,
    readonly column: number,
    value: number,
    mirrored: number,
    readonly measurement?: string,
  ) {
    super(
      "NOISE_NOT_SYMMETRIC",
      `${form} of ${called(measurement)} is ${value} at row ${row}, column ${column} and ${mirrored} at row ${column}, column ${row}: ` +
        "it must be symmetric. Give the mean of both when the difference is rounding.",
      { form, row, column, value, mirrored, measurement },
    );
  }
}

/** A covariance or information matrix of noise that is not positive definite. */
export class NoiseNotPositiveDefiniteError extends SigmatideError {
  constructor(
    readonly form: "covariance" | "information",
    readonly row: number,
    /** What elimination of the rows before left of the diagonal entry. */
    readonly pivot: number,
    readonly measurement?: string,
  ) {
    super(
      "NOISE_NOT_POSITIVE_DEFINITE",
      `${form} of ${called(measurement)} is not positive definite: Cholesky pivot ${pivot.toExponential(3)} at row ${row}. That row is a ` +
        "combination of the rows before it, or an entry is wrong: leave the row out, or mend the entry.",
      { form, row, pivot, measurement },
    );
  }
}

/** A row so much stronger than others can be that its square leaves the range of numbers. */
export class WeightRangeError extends SigmatideError {
  constructor(
    readonly row: number,
    readonly measurement?: string,
  ) {
    super(
      "WEIGHT_RANGE",
      `Row ${row} of ${called(measurement)}, divided by its standard deviation, passes 1e150, so that its square would overflow: ` +
        "choose units in which readings and their deviations are nearer to one.",
      { row, measurement },
    );
  }
}
