// A real surveying problem whose rows arrive one by one and then partly leave, against a record in 113-bit arithmetic.
// Matrix: Harwell-Boeing collection, WELL1033 (Duff, Grimes, Lewis 1989), from Paige, Saunders (1982). The prior is unit information.
import { existsSync, readFileSync } from "node:fs";
import { beforeAll, expect, test } from "vitest";
import { Estimate, type MeasurementId, type StateId } from "../../src/index.js";
import { initFacade } from "../support/facade.js";

const folder = new URL("../../../shared/data/matrices/", import.meta.url);
beforeAll(initFacade);

interface Step {
  readonly activeRows: number;
  readonly logDetInformation: string;
  readonly traceCovariance: string;
  readonly variances: readonly string[];
  readonly covariances: readonly string[];
  readonly state: readonly string[];
  readonly cost: string;
  readonly nextRow?: {
    readonly row: number;
    readonly predictedVariance: string;
    readonly innovation: string;
    readonly innovationVariance: string;
    readonly mahalanobisSquared: string;
    readonly informationGainNats: string;
  };
}

const lines = (name: string): string[][] =>
  readFileSync(new URL(name, folder), "utf8")
    .split("\n")
    .filter((line) => line !== "" && !line.startsWith("%"))
    .map((line) => line.trim().split(/\s+/));

/** The information matrix has condition 166² (Paige, Saunders) or less; 1e3 updates of a few ε each. */
const TOLERANCE = 1e3 * 4 * Number.EPSILON * 166 ** 2;

test.for(["all", "none"] as const)("a growing record of 1033 rows on 320 unknowns, track %s", (track, { skip }) => {
  if (!existsSync(new URL("well1033.growing.json", folder)))
    skip("well1033.growing.json is not at hand: put it and the Harwell-Boeing files into ../shared/data/matrices");
  const { steps, marginalIndices, covariancePairs } = JSON.parse(readFileSync(new URL("well1033.growing.json", folder), "utf8")) as {
    steps: Step[];
    marginalIndices: number[];
    covariancePairs: [number, number][];
  };
  const [[rowCount, unknowns], ...entries] = lines("well1033.mtx").map((words) => words.map(Number)) as [[number, number], ...number[][]];
  const right = lines("well1033_rhs.mtx")
    .slice(1)
    .map(([value]) => Number(value));
  const rows: { unknown: number; value: number }[][] = Array.from({ length: rowCount }, () => []);
  for (const [i, j, value] of entries as [number, number, number][]) rows[i - 1]!.push({ unknown: j - 1, value });

  const estimate = new Estimate({ track });
  const ids: StateId[] = Array.from({ length: unknowns }, () => estimate.addState(1));
  for (const id of ids) estimate.addMeasurement({ states: [id], jacobians: [[[1]]], residual: [0], standardDeviations: [1] });
  estimate.commit();
  const measurement = (row: number) => ({
    states: rows[row - 1]!.map(({ unknown }) => ids[unknown]!),
    jacobians: rows[row - 1]!.map(({ value }) => [[value]]),
    residual: [right[row - 1]!],
    standardDeviations: [1],
  });
  const near = (found: number, printed: string, scale = Math.abs(Number(printed))): void =>
    expect(Math.abs(found - Number(printed))).toBeLessThanOrEqual(TOLERANCE * scale);
  const measurements: MeasurementId[] = [];
  for (const step of steps) {
    if (step.activeRows >= measurements.length) {
      for (let row = measurements.length + 1; row <= step.activeRows; row += 1) {
        measurements.push(estimate.addMeasurement(measurement(row)));
        estimate.commit();
      }
    } else {
      for (let row = 10; row <= rowCount; row += 20) {
        estimate.withdraw(measurements[row - 1]!);
        estimate.commit();
      }
    }
    near(estimate.logDeterminant(), step.logDetInformation, unknowns);
    const blocks = estimate.marginals();
    near(
      blocks.reduce((sum, value) => sum + value, 0),
      step.traceCovariance,
    );
    const solution = estimate.solution();
    const size = solution.reduce((most, value) => Math.max(most, Math.abs(value)), 1);
    for (const [k, index] of marginalIndices.entries()) {
      near(blocks[index - 1]!, step.variances[k]!);
      near(solution[index - 1]!, step.state[k]!, size);
    }
    for (const [k, [a, b]] of covariancePairs.entries())
      near(estimate.crossCovariance(ids[a - 1]!, ids[b - 1]!)[0]!, step.covariances[k]!, 1);
    near(estimate.varianceFactor().weightedSquares, step.cost, 1 + Number(step.cost));
    if (!step.nextRow) continue;
    const told = estimate.evaluate(measurement(step.nextRow.row));
    near(told.innovationCovariance[0]!, step.nextRow.innovationVariance);
    near(told.innovation[0]!, step.nextRow.innovation, size);
    near(told.mahalanobisSquared, step.nextRow.mahalanobisSquared, size * size);
    near(told.informationGain, step.nextRow.informationGainNats, 1);
  }
  expect(measurements).toHaveLength(rowCount);
  estimate.dispose();
});
