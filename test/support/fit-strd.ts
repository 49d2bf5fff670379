// Fits a published nonlinear data set through the kind for the user's own function, from the certified second start.
import { expect } from "vitest";
import { Adjustment } from "../../src/model/adjustment.js";
import { ownFunction } from "../../src/model/own-function.js";
import { DenseEstimate } from "./dense-estimate.js";
import { models, type NonlinearReference } from "./strd-nonlinear.js";

export function fitsToCertifiedDigits({ name, data, start2, certified }: NonlinearReference): void {
  const model = models[name]!;
  // Linear models to a ten-millionth of a unit, and Jacobians to a tenth of that: six digits and more, since no standard deviation is more than
  // a few times its parameter.
  const adjustment = new Adjustment(new DenseEstimate(), { linearizationTolerance: 1e-7 });
  const parameters = start2.map((_, k) => `b${k + 1}`);
  for (const [k, value] of start2.entries())
    adjustment.addState({ name: parameters[k]!, kind: "scalar", fixed: false, value: Float64Array.of(value) });
  for (const [y, x] of data)
    adjustment.addReading({
      kind: ownFunction({
        name,
        states: parameters.map(() => "scalar"),
        predict: (values) => [
          model(
            values.map((value) => value[0]!),
            x!,
          ),
        ],
      }),
      states: parameters,
      value: Float64Array.of(y!),
      standardDeviations: Float64Array.of(1),
    });
  adjustment.solve();

  const variance = adjustment.cost() / (data.length - parameters.length);
  expect(relative(Math.sqrt(variance), certified.residualStandardDeviation)).toBeLessThan(1e-6);
  for (const [k, parameter] of parameters.entries()) {
    expect(relative(adjustment.value(parameter)[0]!, certified.parameters[k]!), parameter).toBeLessThan(1e-6);
    const deviation = Math.sqrt(variance * adjustment.covariance(parameter)[0]!);
    expect(relative(deviation, certified.standardDeviations[k]!), `deviation of ${parameter}`).toBeLessThan(1e-6);
  }
}

const relative = (found: number, certified: number) => Math.abs(found - certified) / Math.abs(certified);
