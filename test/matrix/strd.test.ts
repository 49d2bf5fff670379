// Certified standard deviations of the NIST StRD linear fits by way of the normal equations, and how many digits that way costs.
//
// Digits kept: the normal equations have the squared condition κ(X)² of the design matrix, so parameters keep about 16 − log₁₀ κ² digits
// (Björck, "Numerical Methods for Least Squares Problems", 1996, ch. 2). Integer powers whose sums stay below 2⁵³ enter without error, and
// their cofactors keep more. `digits` below is what a dense Cholesky in double arithmetic keeps, less one digit for another order of summing.
import { beforeAll, describe, expect, test } from "vitest";
import { factorize, NotPositiveDefiniteError, SymmetricMatrix } from "../../src/index.js";
import { initFacade } from "../support/facade.js";
import { agreeingDigits, designRow, type LinearFit, linearFits } from "../support/strd.js";

beforeAll(initFacade);

/** The design matrix by columns, from rows. */
function columnsOf(rows: readonly (readonly number[])[]) {
  const columns = rows[0]!.length;
  return {
    rows: rows.length,
    columns,
    columnPointers: Array.from({ length: columns + 1 }, (_, j) => j * rows.length),
    rowIndices: Array.from({ length: columns * rows.length }, (_, p) => p % rows.length),
    values: Array.from({ length: columns * rows.length }, (_, p) => rows[p % rows.length]![Math.floor(p / rows.length)]!),
  };
}

function fitted(rows: readonly (readonly number[])[], responses: readonly number[]) {
  const factor = factorize(SymmetricMatrix.fromNormalEquations(columnsOf(rows)));
  const parameters = [...factor.solve(rows[0]!.map((_, j) => rows.reduce((sum, row, r) => sum + row[j]! * responses[r]!, 0)))];
  const squares = rows.reduce((sum, row, r) => sum + (responses[r]! - row.reduce((p, v, j) => p + v * parameters[j]!, 0)) ** 2, 0);
  const residualStandardDeviation = Math.sqrt(squares / (rows.length - parameters.length));
  const standardDeviations = [...factor.inverseDiagonal()].map((v) => residualStandardDeviation * Math.sqrt(v));
  const inverse = factor.inverseColumns([...parameters.keys()]);
  const reciprocalCondition = factor.reciprocalCondition();
  factor.dispose();
  return { parameters, standardDeviations, residualStandardDeviation, inverse, reciprocalCondition };
}

const plainFit = ({ model, data }: LinearFit) =>
  fitted(
    data.map(([, ...predictors]) => designRow(model, predictors)),
    data.map(([response]) => response!),
  );
const fewest = (found: readonly number[], certified: readonly number[]): number =>
  Math.min(...found.map((v, k) => agreeingDigits(v, certified[k]!)));

describe("the normal equations as they are", () => {
  test.each([
    { name: "Norris", digits: { parameters: 11, deviations: 13.5 } },
    { name: "Pontius", digits: { parameters: 11, deviations: 12.5 } },
    { name: "NoInt1", digits: { parameters: 13.5, deviations: 13.5 } },
    { name: "Wampler3", digits: { parameters: 5.5, deviations: 10 } },
    { name: "Wampler4", digits: { parameters: 5.5, deviations: 10 } },
    { name: "Longley", digits: { parameters: 6, deviations: 6.5 } },
  ] as const)("$name: parameters to $digits.parameters digits, standard deviations to $digits.deviations", ({ name, digits }) => {
    const certified = linearFits[name];
    const found = plainFit(certified);
    expect(fewest(found.parameters, certified.parameters)).toBeGreaterThan(digits.parameters);
    expect(fewest(found.standardDeviations, certified.standardDeviations)).toBeGreaterThan(digits.deviations);
    expect(agreeingDigits(found.residualStandardDeviation, certified.residualStandardDeviation)).toBeGreaterThan(digits.deviations);
  });

  test("Wampler1, an exact fit: parameters 1 to 5.5 digits; its standard deviations are 0 as far as those digits go", () => {
    const found = plainFit(linearFits.Wampler1);
    expect(fewest(found.parameters, linearFits.Wampler1.parameters)).toBeGreaterThan(5.5);
    // Parameters off by 1e-6 leave residuals of the powers of x they multiply, in part cancelling: far below the responses of 4e6.
    expect(found.residualStandardDeviation).toBeLessThan(1e-3);
  });

  test("Longley loses more than half of the digits, and the condition estimate says so", () => {
    const found = plainFit(linearFits.Longley);
    // κ(X) = 4.859e9, so κ(X)² = 2.36e19 in the 2-norm: the estimate, in the 1-norm, must warn of a matrix singular to working precision.
    expect(found.reciprocalCondition).toBeLessThan(2.2e-16);
    expect(fewest(found.parameters, linearFits.Longley.parameters)).toBeLessThan(11);
  });

  test("Filip, κ(X) = 1.8e15, has no digit in its normal equations: refused, or the condition estimate calls it singular", () => {
    const rows = linearFits.Filip.data.map(([, ...predictors]) => designRow(10, predictors));
    const norms = rows[0]!.map((_, j) => Math.hypot(...rows.map((row) => row[j]!)));
    for (const design of [rows, rows.map((row) => row.map((v, j) => v / norms[j]!))]) {
      let reciprocalCondition = 0;
      try {
        ({ reciprocalCondition } = fitted(
          design,
          linearFits.Filip.data.map(([response]) => response),
        ));
      } catch (error) {
        expect(error).toBeInstanceOf(NotPositiveDefiniteError);
      }
      expect(reciprocalCondition).toBeLessThan(2.2e-16);
    }
  });
});

describe("centred and scaled columns", () => {
  test("Longley: slopes and the intercept, standard deviations to 10 digits", () => {
    const { data, parameters, standardDeviations } = linearFits.Longley;
    const predictors = data.map(([, ...row]) => row);
    const centre = predictors[0]!.map((_, j) => predictors.reduce((sum, row) => sum + row[j]!, 0) / data.length);
    const scale = predictors[0]!.map((_, j) => Math.max(...predictors.map((row) => Math.abs(row[j]! - centre[j]!))));
    const found = fitted(
      predictors.map((row) => [1, ...row.map((v, j) => (v - centre[j]!) / scale[j]!)]),
      data.map(([response]) => response),
    );
    // y = a₀ + Σ aⱼ (xⱼ − cⱼ) / sⱼ: slopes aⱼ / sⱼ, intercept gᵀa with g = (1, −cⱼ / sⱼ).
    const g = [1, ...centre.map((c, j) => -c / scale[j]!)];
    const slopes = scale.map((s, j) => found.parameters[j + 1]! / s);
    const intercept = g.reduce((sum, v, j) => sum + v * found.parameters[j]!, 0);
    expect(fewest([intercept, ...slopes], parameters)).toBeGreaterThan(10);
    const variance = g.reduce((sum, v, i) => sum + v * g.reduce((s, w, j) => s + w * found.inverse[i + 7 * j]!, 0), 0);
    const deviations = [
      found.residualStandardDeviation * Math.sqrt(variance),
      ...scale.map((s, j) => found.standardDeviations[j + 1]! / s),
    ];
    expect(fewest(deviations, standardDeviations)).toBeGreaterThan(10);
  });

  test("Filip in Chebyshev polynomials of centred, scaled x: the highest coefficient, its deviation and the residual's to 8 digits", () => {
    const { data, parameters, standardDeviations, residualStandardDeviation } = linearFits.Filip;
    const x = data.map(([, v]) => v);
    const [low, high] = [Math.min(...x), Math.max(...x)];
    const chebyshev = (t: number): number[] => {
      const values = [1, t];
      while (values.length < 11) values.push(2 * t * values.at(-1)! - values.at(-2)!);
      return values;
    };
    const found = fitted(
      x.map((v) => chebyshev((2 * v - low - high) / (high - low))),
      data.map(([response]) => response),
    );
    // T₁₀(t) = 2⁹ t¹⁰ + …, t = 2 x / (high − low) + …
    const leading = 2 ** 9 * (2 / (high - low)) ** 10;
    expect(agreeingDigits(leading * found.parameters[10]!, parameters[10])).toBeGreaterThan(8);
    expect(agreeingDigits(leading * found.standardDeviations[10]!, standardDeviations[10])).toBeGreaterThan(8);
    expect(agreeingDigits(found.residualStandardDeviation, residualStandardDeviation)).toBeGreaterThan(8);
  });
});
