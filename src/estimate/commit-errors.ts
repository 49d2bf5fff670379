// What a commit, a withdrawal or a question refuses, each with the offending value and the mend.
import { SigmatideError } from "../errors.js";
import type { Motion } from "./motions.js";
import type { Undetermined } from "./undetermined.js";

/** A measurement that was never added, or is out already. */
export class UnknownMeasurementError extends SigmatideError {
  constructor(
    readonly measurement: unknown,
    why: "was never added" | "was withdrawn already" | "reads a forgotten state, which has taken its information along",
  ) {
    super(
      "UNKNOWN_MEASUREMENT",
      `Measurement ${String(measurement)} ${why}: withdraw or replace only what addMeasurement gave and is still in force.`,
      { measurement, why },
    );
  }
}

/** A state that is asked for before the commit that brings it in. */
export class NotCommittedError extends SigmatideError {
  constructor(readonly state: number) {
    super("NOT_COMMITTED", `State ${state} has been added but not committed yet: call commit() before asking for it.`, { state });
  }
}

/** A call from within a commit, by its progress callback say. */
export class CommitUnderWayError extends SigmatideError {
  constructor(call: string) {
    super("COMMIT_UNDER_WAY", `${call} was called while a commit is under way: wait until it has returned.`, { call });
  }
}

/** Numbers that rounding may have spoilt beyond the tolerance. */
export class UncertainAnswerError extends SigmatideError {
  constructor(
    readonly bound: number,
    readonly tolerance: number,
  ) {
    super(
      "UNCERTAIN_ANSWER",
      `The marginals are good to a relative error of ${bound.toExponential(1)} only, and the tolerance is ${tolerance.toExponential(1)}: the ` +
        "system is ill-conditioned. Add a prior or a tie where it is weak, raise the tolerance, or set onDoubt: 'answer'.",
      { bound, tolerance },
    );
  }
}

/** The measurements leave states free to move. Nothing was changed, and what was pending is still pending. */
export class UndeterminedError extends SigmatideError {
  /** States that can move, by id. */
  readonly states: readonly number[];
  /** Their names, or "state 7". */
  readonly names: readonly string[];
  /** How they move, where that is plain. */
  readonly motions: readonly Motion[];
  constructor({ states, names, motions, remedy, because }: Undetermined) {
    super("UNDETERMINED", because, { states: [...states], names: [...names], motions: [...motions], remedy });
    this.states = states;
    this.names = names;
    this.motions = motions;
  }
}

const snapshotFaults = {
  foreign: ["These bytes are not a snapshot", "Give restore() the bytes that snapshot() returned"],
  "cut short": ["The snapshot is cut short", "Read all of it again, or use an earlier one"],
  damaged: ["The snapshot is damaged", "Read it again, or use an earlier one"],
  "another version": ["The snapshot is of another format version", "Restore it with the release that wrote it"],
  "another build": ["The snapshot is of another kernel build", "Restore it with the build that wrote it"],
} as const;

/** Bytes that no estimate can be restored from. */
export class SnapshotError extends SigmatideError {
  constructor(
    readonly problem: keyof typeof snapshotFaults,
    /** Where in the bytes it shows; undefined: in no one place. */
    readonly byte: number | undefined,
    because: string,
  ) {
    const [what, mend] = snapshotFaults[problem];
    super("SNAPSHOT", `${what}: ${byte === undefined ? "" : `at byte ${byte}, `}${because}. ${mend}.`, { problem, byte, because });
  }
}
