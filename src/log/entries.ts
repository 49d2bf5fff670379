import type { Reading, StateDeclaration } from "../model/reading.js";
import type { Units } from "./units.js";

/** The first line of a log: what its numbers are written in. */
export interface HeaderEntry {
  readonly type: "header";
  readonly title?: string;
  /** Units of values. */
  readonly units: Units;
  /** Units of standard deviations and of covariances (products of two of them). */
  readonly deviationUnits: Units;
}
export type StateEntry = StateDeclaration & { readonly type: "state" };
export type ReadingEntry = Reading & { readonly type: "reading" };
/** Takes a named reading out again. */
export interface WithdrawEntry {
  readonly type: "withdraw";
  readonly reading: string;
  readonly time?: number | string;
}
/** Drops states; what was known about their neighbours through them is kept. */
export interface ForgetEntry {
  readonly type: "forget";
  readonly states: readonly string[];
  readonly time?: number | string;
}
export interface CommentEntry {
  readonly type: "comment";
  readonly text: string;
}

/** One line of a measurement log, in SI units and radians whatever the log is written in. */
export type LogEntry = HeaderEntry | StateEntry | ReadingEntry | WithdrawEntry | ForgetEntry | CommentEntry;
/** An entry with the number of the line it was read from. */
export type NumberedEntry = LogEntry & { readonly line: number };
