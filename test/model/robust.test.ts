import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { cauchy, huber, tukey } from "../../src/model/robust.js";
import { real } from "./arbitraries.js";

describe("robust weights", () => {
  for (const make of [huber, cauchy, tukey]) {
    test(`${make().name}: the weight is the loss's slope over u, 1 at a small residual, and never grows with it`, () => {
      fc.assert(
        fc.property(real(-20, 20), real(0.5, 8), (u, tuning) => {
          const { weight, loss } = make(tuning);
          const h = 1e-4;
          fc.pre(Math.abs(Math.abs(u) - tuning) > h);
          // Central differences: h² × third derivative, and ε × loss / h.
          expect(Math.abs((loss(u + h) - loss(u - h)) / (2 * h) - u * weight(u))).toBeLessThan(1e-6);
          expect(weight(1e-9)).toBeCloseTo(1, 15);
          expect(weight(Math.abs(u) + 0.1)).toBeLessThanOrEqual(weight(u));
          expect(loss(0)).toBe(0);
        }),
      );
    });

    test(`${make().name}: the default keeps 95 % efficiency on Gaussian noise (Holland, Welsch 1977)`, () => {
      // Asymptotic efficiency of an M-estimate of location: (E ψ')² / E ψ², ψ(u) = u w(u); E ψ' = E u ψ by parts.
      const { weight } = make();
      let [slope, square] = [0, 0];
      const h = 1e-3;
      for (let u = -12; u <= 12; u += h) {
        const density = (Math.exp((-u * u) / 2) / Math.sqrt(2 * Math.PI)) * h;
        slope += u * u * weight(u) * density;
        square += (u * weight(u)) ** 2 * density;
      }
      // The published constants have four digits: 0.9500 ± 0.0003.
      expect(Math.abs(slope ** 2 / square - 0.95)).toBeLessThan(3e-4);
    });
  }

  test("a gross residual counts for a little (Huber), almost nothing (Cauchy), nothing (Tukey)", () => {
    expect(huber().weight(13.45)).toBeCloseTo(0.1, 14);
    expect(cauchy(2).weight(6)).toBeCloseTo(0.1, 14);
    expect(tukey().weight(5)).toBe(0);
  });
});
