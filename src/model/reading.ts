import type { Setup } from "./reading-form.js";
import type { ReadingKindName } from "./reading-kinds.js";
import type { StateKindName } from "./states.js";

/** A state as it is declared: by name and kind, with an approximate value when one is known. SI units, radians. */
export interface StateDeclaration {
  readonly name: string;
  readonly kind: StateKindName;
  /** In the kind's stored form. */
  readonly value?: Float64Array;
  /** Held at its value, not estimated. */
  readonly fixed: boolean;
}

/** A reading between named states. SI units, radians. Its noise is given once: as standard deviations, or as a covariance. */
export interface Reading<Kind = ReadingKindName> {
  readonly kind: Kind;
  /** In the order of the kind's roles. */
  readonly states: readonly string[];
  readonly value: Float64Array;
  /** One for each number of the residual. */
  readonly standardDeviations?: Float64Array;
  /** Rows × rows, row-major. */
  readonly covariance?: Float64Array;
  readonly setup?: Setup;
  readonly name?: string;
  /** Seconds of the log's own clock, or a date and time as RFC 3339 writes it. */
  readonly time?: number | string;
}
