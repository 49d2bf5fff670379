// What an estimate knows of each state and measurement that was ever added.
import type { CheckedMeasurement } from "./rows.js";

export interface StateRecord {
  readonly dimension: number;
  readonly name: string | undefined;
  /** Pending: added since the last commit. Forgotten ones stay in the base until the next one. */
  standing: "pending" | "committed" | "forgotten";
}

export interface MeasurementRecord {
  rows: CheckedMeasurement;
  standing: "pending" | "committed" | "withdrawn" | "absorbed";
}
