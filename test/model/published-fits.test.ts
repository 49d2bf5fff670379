import { describe, expect, test } from "vitest";
import { Adjustment } from "../../src/model/adjustment.js";
import { ownFunction } from "../../src/model/own-function.js";
import { DenseEstimate } from "../support/dense-estimate.js";
import { fitsToCertifiedDigits } from "../support/fit-strd.js";
import { smallReferences } from "../support/strd-nonlinear.js";

describe("NIST StRD nonlinear fits from start 2, parameters and standard deviations to six digits", () => {
  for (const reference of smallReferences) test(reference.name, () => fitsToCertifiedDigits(reference));
});

test("the calibration of a thermometer: JCGM 100:2008 (GUM), Annex H.3, Table H.6", () => {
  const t = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.01, 26.511];
  const b = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.16];
  const estimate = new DenseEstimate();
  const adjustment = new Adjustment(estimate);
  for (const name of ["y1", "y2"]) adjustment.addState({ name, kind: "scalar", fixed: false, value: Float64Array.of(0) });
  const line = (at: number) =>
    ownFunction({ name: "line", states: ["scalar", "scalar"], predict: ([y1, y2]) => [y1![0]! + y2![0]! * (at - 20)] });
  for (const [k, at] of t.entries())
    adjustment.addReading({ kind: line(at), states: ["y1", "y2"], value: Float64Array.of(b[k]!), standardDeviations: Float64Array.of(1) });
  adjustment.solve();

  const variance = adjustment.cost() / (t.length - 2);
  const deviation = (name: string) => Math.sqrt(variance * adjustment.covariance(name)[0]!);
  const covariance = estimate.cross(adjustment.state("y1").id!, adjustment.state("y2").id!)[0]!;
  const [v1, v2] = ["y1", "y2"].map((name) => adjustment.covariance(name)[0]!) as [number, number];
  const [y1, y2] = ["y1", "y2"].map((name) => adjustment.value(name)[0]!) as [number, number];
  // Published figures, each to its last printed digit.
  expect(y1.toFixed(4)).toBe("-0.1712");
  expect(deviation("y1").toFixed(4)).toBe("0.0029");
  expect(y2.toFixed(5)).toBe("0.00218");
  expect(deviation("y2").toFixed(5)).toBe("0.00067");
  expect((covariance / Math.sqrt(v1 * v2)).toFixed(2)).toBe("-0.93");
  expect(Math.sqrt(variance).toFixed(4)).toBe("0.0035");
  expect((y1 + 10 * y2).toFixed(4)).toBe("-0.1494");
  expect(Math.sqrt(variance * (v1 + 20 * covariance + 100 * v2)).toFixed(4)).toBe("0.0041");
});

test("a level circuit of two new points: exact cofactors 4/19, 5/19, 1/19 from the normal matrix [[5, −1], [−1, 4]]", () => {
  // Seven levelled heights from benchmarks and an eighth between the new points, as an open course text on least squares for surveyors has them.
  const estimate = new DenseEstimate();
  const adjustment = new Adjustment(estimate);
  for (const name of ["A", "B", "C", "D"]) adjustment.addState({ name, kind: "height", fixed: true, value: Float64Array.of(0) });
  for (const name of ["Q", "R"]) adjustment.addState({ name, kind: "height", fixed: false });
  const level = (from: string, to: string, value: number) =>
    adjustment.addReading({
      kind: "height-difference",
      states: [from, to],
      value: Float64Array.of(value),
      standardDeviations: Float64Array.of(1),
    });
  // Each direct height as its residual in the published adjustment of the first seven.
  for (const [k, value] of [0.015, -0.015, 0.035, -0.035].entries()) level("ABCD"[k]!, "Q", value);
  for (const [k, value] of [-0.007, 0.033, -0.027].entries()) level("ACD"[k]!, "R", value);
  adjustment.solve();
  expect(adjustment.covariance("Q")[0]).toBeCloseTo(1 / 4, 14);
  expect(adjustment.covariance("R")[0]).toBeCloseTo(1 / 3, 14);
  // Printed: sum of squares 0.004767, its mean of R held to the printed millimetre.
  expect(adjustment.cost()).toBeCloseTo(0.004767, 6);
  level("R", "Q", 0);
  const { iterations } = adjustment.solve();
  expect(iterations).toHaveLength(1);
  expect(adjustment.covariance("Q")[0]).toBeCloseTo(4 / 19, 14);
  expect(adjustment.covariance("R")[0]).toBeCloseTo(5 / 19, 14);
  expect(estimate.cross(adjustment.state("Q").id!, adjustment.state("R").id!)[0]).toBeCloseTo(1 / 19, 14);
});
