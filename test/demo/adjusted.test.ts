// The demonstration logs through reading, adjustment and the estimate, against the truth beside them.
import { beforeAll, describe, expect, test } from "vitest";
import { quayMonitoring } from "../../src/demo/monitoring.js";
import { yardPatrol } from "../../src/demo/patrol.js";
import { Estimate } from "../../src/estimate/estimate.js";
import { applyEntry } from "../../src/log/apply.js";
import type { LogEntry } from "../../src/log/entries.js";
import { Adjustment } from "../../src/model/adjustment.js";
import { type StateKindName, stateKinds } from "../../src/model/states.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

function adjusted(entries: Iterable<LogEntry>): { adjustment: Adjustment; estimate: Estimate } {
  const estimate = new Estimate();
  const adjustment = new Adjustment(estimate);
  for (const entry of entries) applyEntry(adjustment, entry);
  adjustment.solve();
  return { adjustment, estimate };
}

/** Weighted squares over degrees of freedom, and what it may be off 1 by: five standard deviations of χ²/f. */
function varianceFactor(adjustment: Adjustment): { factor: number; bound: number } {
  let freedom = 0;
  for (const { residual } of adjustment.readings()) freedom += residual.length;
  for (const { kind } of adjustment.states()) freedom -= stateKinds[kind as StateKindName].dimension;
  return { factor: adjustment.cost() / freedom, bound: 5 * Math.sqrt(2 / freedom) };
}

/** The largest error of a coordinate over its own standard deviation. */
function largestError(adjustment: Adjustment, truth: Readonly<Record<string, readonly number[]>>): number {
  let largest = 0;
  for (const [name, expected] of Object.entries(truth)) {
    const [value, covariance] = [adjustment.value(name), adjustment.covariance(name)];
    const n = expected.length;
    for (let k = 0; k < Math.min(n, 2); k++)
      largest = Math.max(largest, Math.abs(value[k]! - expected[k]!) / Math.sqrt(covariance[k * n + k]!));
  }
  return largest;
}

describe("the demonstration logs, adjusted", () => {
  test("the yard patrol comes to the true course, as sure as it says", () => {
    const { entries, truth } = yardPatrol();
    const { adjustment, estimate } = adjusted(entries);
    const { factor, bound } = varianceFactor(adjustment);
    expect(Math.abs(factor - 1)).toBeLessThan(bound);
    // Some 2 500 coordinates: one passes 5.5 standard deviations once in ten thousand such logs.
    expect(largestError(adjustment, truth.values)).toBeLessThan(5.5);
    estimate.dispose();
  });

  test("the quay: without its three blunders the readings fit as stated, the bollard has gone down, the rest has not", () => {
    const { entries, truth } = quayMonitoring();
    const { adjustment, estimate } = adjusted(entries);
    const spoiled = varianceFactor(adjustment);
    expect(spoiled.factor - 1).toBeGreaterThan(spoiled.bound);
    for (const { reading } of truth.blunders) adjustment.withdraw(reading);
    adjustment.solve();
    const { factor, bound } = varianceFactor(adjustment);
    expect(Math.abs(factor - 1)).toBeLessThan(bound);
    expect(largestError(adjustment, truth.positions)).toBeLessThan(5.5);

    const down = (mark: string) => adjustment.value(`${mark}@1`)[2]! - adjustment.value(`${mark}@6`)[2]!;
    // Heights are good to half a millimetre each.
    expect(Math.abs(down("B11.0") - 0.0075)).toBeLessThan(0.003);
    for (const mark of ["B02.0", "B20.0", "B29.0"]) expect(Math.abs(down(mark))).toBeLessThan(0.003);
    estimate.dispose();
  });
});
