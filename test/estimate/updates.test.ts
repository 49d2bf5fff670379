// One change of the rows against the closed forms, on dense matrices of a general library, and fits that certified data have the answers of.
import { determinant, inverse, Matrix, SingularValueDecomposition } from "ml-matrix";
import { beforeAll, describe, expect, test } from "vitest";
import { net } from "../../bench/families/net.js";
import { Estimate, type MeasurementId, type MeasurementInput, type StateId, UndeterminedError } from "../../src/index.js";
import { initFacade } from "../support/facade.js";
import { designRow, type LinearFit, linearFits } from "../support/strd.js";

beforeAll(initFacade);

const points = 20;
function levelled(track: "all" | "none") {
  const stream = net(points);
  const estimate = new Estimate({ track });
  const ids: StateId[] = Array.from({ length: stream.states }, () => estimate.addState(2));
  for (let k = 0; k < stream.measurements; k += 1) {
    const { states, ...rest } = stream.measurement(k);
    estimate.addMeasurement({ states: states.map((i) => ids[i]!), ...rest });
  }
  estimate.commit();
  return { estimate, ids };
}

const square = (values: Float64Array): Matrix => {
  const n = Math.sqrt(values.length);
  return new Matrix(Array.from({ length: n }, (_, i) => Array.from(values.subarray(i * n, (i + 1) * n))));
};

describe.each(["all", "none"] as const)("a batch of rows, track %s", (track) => {
  test("changes Σ by Woodbury's formula (1950) and the determinant by the matrix determinant lemma; taking it out again changes both back", () => {
    const { estimate, ids } = levelled(track);
    const before = square(estimate.jointMarginal(ids));
    const logBefore = estimate.logDeterminant();
    const noise = new Matrix([
      [4e-6, 1e-6, 0],
      [1e-6, 9e-6, 2e-6],
      [0, 2e-6, 5e-6],
    ]);
    const jacobians = [
      [
        [1, 0],
        [0, 1],
        [0.3, -0.2],
      ],
      [
        [-1, 0.1],
        [0, -1],
        [0.5, 0.5],
      ],
      [
        [0, 0],
        [0.4, 0],
        [0, -1],
      ],
    ];
    const read = [2, 11, 17];
    const batch: MeasurementInput = {
      states: read.map((k) => ids[k]!),
      jacobians,
      residual: [1e-3, -2e-3, 5e-4],
      covariance: noise.to2DArray(),
    };
    const A = new Matrix(3, 2 * points);
    for (const [k, state] of read.entries()) A.setSubMatrix(jacobians[k]!, 0, 2 * state);
    const S = Matrix.add(A.mmul(before).mmul(A.transpose()), noise);
    const expected = Matrix.sub(before, before.mmul(A.transpose()).mmul(inverse(S)).mmul(A).mmul(before));
    // Both sides carry ε times the scaled condition of Λ, below 1e5 for this family.
    const tolerance = 1e-9 * before.max();
    const gain = Math.log(determinant(S) / determinant(noise)) / 2;
    const told = estimate.evaluate(batch);
    expect(Math.abs(told.informationGain - gain)).toBeLessThan(1e-9 * gain);
    expect(Matrix.sub(square(told.innovationCovariance), S).abs().max()).toBeLessThan(tolerance);

    const id = estimate.addMeasurement(batch);
    estimate.commit();
    expect(
      Matrix.sub(square(estimate.jointMarginal(ids)), expected)
        .abs()
        .max(),
    ).toBeLessThan(tolerance);
    expect(Math.abs(estimate.logDeterminant() - logBefore - 2 * gain)).toBeLessThan(1e-9 * Math.abs(logBefore));
    const blocks = estimate.marginals();
    for (const [k] of ids.entries())
      for (const [at, value] of expected
        .subMatrix(2 * k, 2 * k + 1, 2 * k, 2 * k + 1)
        .to1DArray()
        .entries())
        expect(Math.abs(blocks[4 * k + at]! - value)).toBeLessThan(tolerance);

    estimate.withdraw(id);
    estimate.commit();
    expect(
      Matrix.sub(square(estimate.jointMarginal(ids)), before)
        .abs()
        .max(),
    ).toBeLessThan(tolerance);
    expect(Math.abs(estimate.logDeterminant() - logBefore)).toBeLessThan(1e-9 * Math.abs(logBefore));
    estimate.dispose();
  });
});

/** Digits of a fit: n ε times the condition of the normal equations once their columns have unit length, and room for both ways. */
function toleranceOf({ model, data }: LinearFit): number {
  const design = new Matrix(data.map(([, ...x]) => designRow(model, x)));
  for (let j = 0; j < design.columns; j += 1) {
    const length = Math.hypot(...design.getColumn(j));
    for (let i = 0; i < design.rows; i += 1) design.set(i, j, design.get(i, j) / length);
  }
  return 16 * data.length * Number.EPSILON * new SingularValueDecomposition(design).condition ** 2;
}

describe.each(["Norris", "NoInt1", "Pontius"] as const)("%s of the Statistical Reference Datasets (NIST), one row at a time", (name) => {
  test.each(["all", "none"] as const)("ends at the certified values, goes down to the fewest rows and comes back, track %s", (track) => {
    const fit: LinearFit = linearFits[name];
    const unknowns = fit.parameters.length;
    const tolerance = toleranceOf(fit);
    const size = Math.hypot(...fit.data.map(([y]) => y!));
    const estimate = new Estimate({ track });
    const state = estimate.addState(unknowns);
    const rows = new Map<number, MeasurementId>();
    const add = (k: number): void => {
      const [y, ...x] = fit.data[k]!;
      rows.set(
        k,
        estimate.addMeasurement({ states: [state], jacobians: [[designRow(fit.model, x)]], residual: [y!], standardDeviations: [1] }),
      );
    };
    const certified = (): void => {
      const { factor, degreesOfFreedom } = estimate.varianceFactor();
      expect(degreesOfFreedom).toBe(fit.data.length - unknowns);
      // Residuals are differences of numbers of the size of y: their squares lose its square over theirs.
      const residualTolerance = (tolerance * size) / (fit.residualStandardDeviation * Math.sqrt(degreesOfFreedom));
      expect(Math.abs(Math.sqrt(factor) / fit.residualStandardDeviation - 1)).toBeLessThan(residualTolerance);
      const [x, covariance] = [estimate.solution(state), estimate.marginal(state)];
      for (let j = 0; j < unknowns; j += 1) {
        const cofactor = Math.sqrt(covariance[j * (unknowns + 1)]!);
        const expected = fit.standardDeviations[j]! / fit.residualStandardDeviation;
        // Certified to 15 digits, two of them divided.
        expect(Math.abs(cofactor / expected - 1)).toBeLessThan(tolerance + 2e-14);
        expect(Math.abs(x[j]! - fit.parameters[j]!)).toBeLessThan(tolerance * expected * size + 1e-14 * Math.abs(fit.parameters[j]!));
      }
    };

    for (let k = 0; k < fit.data.length; k += 1) {
      add(k);
      if (k + 1 < unknowns) expect(() => estimate.commit()).toThrow(UndeterminedError);
      else estimate.commit();
    }
    certified();
    // Those left have predictors far apart (Norris: 448.9 and 0.5; Pontius: spread over its range).
    const kept = name === "Pontius" ? [0, 10, 19] : Array.from({ length: unknowns }, (_, k) => fit.data.length - 1 - k);
    const gone = [...fit.data.keys()].filter((k) => !kept.includes(k));
    for (const k of gone) {
      estimate.withdraw(rows.get(k)!);
      expect(estimate.commit().measurements).toBe(rows.size - gone.indexOf(k) - 1);
    }
    // As many rows as unknowns: the fit goes through its points.
    for (const k of kept) {
      const [y, ...x] = fit.data[k]!;
      const value = designRow(fit.model, x).reduce((sum, a, j) => sum + a * estimate.solution(state)[j]!, 0);
      expect(Math.abs(value - y!)).toBeLessThan(1e3 * tolerance * size);
    }
    estimate.withdraw(rows.get(kept[0]!)!);
    const before = estimate.marginal(state);
    expect(() => estimate.commit()).toThrow(UndeterminedError);
    expect(estimate.marginal(state)).toEqual(before);
    add(kept[0]!); // the withdrawal is still pending; the same row comes in its place
    estimate.commit();
    for (const k of gone) {
      add(k);
      estimate.commit();
    }
    certified();
    estimate.dispose();
  });
});
