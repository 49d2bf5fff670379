// What the decisions refuse, each with the offending value and the mend.
import { SigmatideError } from "../errors.js";

/** A probability (level, confidence, power) outside the open interval (0, 1). */
export class LevelError extends SigmatideError {
  constructor(
    readonly argument: string,
    readonly value: number,
  ) {
    super("LEVEL_OUT_OF_RANGE", `${argument} = ${value} is no probability between 0 and 1, both excluded: give 0.05 for 5 %, never 5.`, {
      argument,
      value,
    });
  }
}

/** Degrees of freedom that no distribution has: zero, negative, infinite or not a number. */
export class DegreesOfFreedomError extends SigmatideError {
  constructor(
    readonly argument: string,
    readonly value: number,
    mend = "Degrees of freedom are readings minus unknowns: without a surplus reading there is nothing to test, so add readings or drop unknowns.",
  ) {
    super("DEGREES_OF_FREEDOM", `${argument} = ${value} is not usable. ${mend}`, { argument, value });
  }
}

/** A covariance that is not one: wrong shape, not symmetric, not finite, or not positive definite. */
export class CovarianceError extends SigmatideError {
  constructor(
    readonly argument: string,
    what: string,
    details: Readonly<Record<string, unknown>> = {},
  ) {
    super("COVARIANCE", `${argument} ${what}`, { argument, ...details });
  }
}

/** A number, vector or option outside what the question can be asked for. */
export class ArgumentError extends SigmatideError {
  constructor(
    readonly argument: string,
    readonly value: unknown,
    mend: string,
  ) {
    super("ARGUMENT", `${argument} = ${value} cannot be used: ${mend}`, { argument, value });
  }
}
