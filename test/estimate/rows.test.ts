import fc from "fast-check";
import { inverse, Matrix } from "ml-matrix";
import { describe, expect, test } from "vitest";
import { restoreColumns } from "../../src/estimate/noise.js";
import { type MeasurementInput, relinearize, whiten } from "../../src/estimate/rows.js";

/** States 0, 1, 2 have 1, 2 and 3 unknowns; no other exists. */
const dimensionOf = (state: number): number | undefined => [1, 2, 3][state];

const finite = fc.double({ min: -10, max: 10, noNaN: true });
const matrixOf = (rows: number, columns: number): fc.Arbitrary<number[][]> =>
  fc.array(fc.array(finite, { minLength: columns, maxLength: columns }), { minLength: rows, maxLength: rows });

/** G Gᵀ + I is positive definite for every G. */
const definite = (g: number[][]): number[][] => {
  const m = new Matrix(g);
  return m.mmul(m.transpose()).add(Matrix.eye(m.rows)).to2DArray();
};

const anyMeasurement = fc.integer({ min: 1, max: 4 }).chain((rows) =>
  fc.array(fc.integer({ min: 0, max: 2 }), { minLength: 1, maxLength: 4 }).chain((states) =>
    fc.record({
      states: fc.constant(states),
      jacobians: fc.tuple(...states.map((s) => matrixOf(rows, dimensionOf(s)!))),
      residual: fc.array(finite, { minLength: rows, maxLength: rows }),
      noise: matrixOf(rows, rows).map(definite),
      form: fc.constantFrom("covariance" as const, "information" as const),
    }),
  ),
);

/** Column-major to a general library's matrix. */
const columns = (x: Float64Array, rows: number): Matrix =>
  new Matrix(Array.from({ length: rows }, (_, i) => Array.from({ length: x.length / rows }, (__, j) => x[j * rows + i]!)));

describe("a measurement is whitened", () => {
  test("whitened rows give Jᵀ R⁻¹ J and Jᵀ R⁻¹ r of a dense library, blocks of one state added up, and B gives the residual back", () => {
    fc.assert(
      fc.property(anyMeasurement, ({ states, jacobians, residual, noise, form }) => {
        const rows = residual.length;
        const checked = whiten({ states, jacobians, residual, [form]: noise } as MeasurementInput, dimensionOf);
        expect(checked.states).toEqual([...new Set(states)]);
        expect(checked.rows).toBe(rows);
        const weight = form === "information" ? new Matrix(noise) : inverse(new Matrix(noise));
        const sum = (state: number): Matrix =>
          states.reduce(
            (total, s, k) => (s === state ? Matrix.add(total, new Matrix(jacobians[k]!)) : total),
            new Matrix(rows, dimensionOf(state)!),
          );
        // R has eigenvalues from 1 to 401, entries of J and r reach 40: n ε κ(R) ‖J‖², with ‖J‖² below 4 × 40², and room for both sides.
        const tolerance = 1e2 * Number.EPSILON * 401 * 4 * 40 ** 2;
        const r = Matrix.columnVector(residual);
        for (const [a, stateA] of checked.states.entries()) {
          const blockA = columns(checked.blocks[a]!, rows).transpose();
          const weighted = sum(stateA).transpose().mmul(weight);
          const onR = blockA.mmul(columns(checked.residual, rows));
          expect(Matrix.sub(onR, weighted.mmul(r)).norm()).toBeLessThan(tolerance);
          for (const [b, stateB] of checked.states.entries())
            expect(Matrix.sub(blockA.mmul(columns(checked.blocks[b]!, rows)), weighted.mmul(sum(stateB))).norm()).toBeLessThan(tolerance);
        }
        const back = checked.residual.slice();
        restoreColumns(checked.noise, rows, back);
        for (const [i, value] of back.entries()) expect(Math.abs(value - residual[i]!)).toBeLessThan(tolerance);
      }),
    );
  });

  test("standard deviations, the covariance of their squares and the information of its inverse say the same; inputs stay as they were", () => {
    const jacobians = [Float64Array.of(1, 2, 3, 4), [[5], [6]]];
    const common = { states: [1, 0], jacobians, residual: [8, 12] };
    const byDeviations = whiten({ ...common, standardDeviations: [2, 4] }, dimensionOf);
    expect(byDeviations.blocks).toEqual([Float64Array.of(0.5, 0.75, 1, 1), Float64Array.of(2.5, 1.5)]);
    expect(byDeviations.residual).toEqual(Float64Array.of(4, 3));
    for (const noise of [
      {
        covariance: [
          [4, 0],
          [0, 16],
        ],
      },
      { information: Float64Array.of(0.25, 0, 0, 0.0625) },
    ]) {
      const { blocks, residual } = whiten({ ...common, ...noise }, dimensionOf);
      expect({ blocks, residual }).toEqual({ blocks: byDeviations.blocks, residual: byDeviations.residual });
    }
    expect(jacobians).toEqual([Float64Array.of(1, 2, 3, 4), [[5], [6]]]);
  });

  test("a new linearization keeps states, repeats and noise", () => {
    const noise = {
      covariance: [
        [4, 1],
        [1, 3],
      ],
    };
    const first = whiten(
      {
        states: [0, 1, 0],
        jacobians: [
          [[1], [2]],
          [
            [3, 4],
            [5, 6],
          ],
          [[7], [8]],
        ],
        residual: [1, 2],
        ...noise,
      },
      dimensionOf,
    );
    const jacobians = [
      [[2], [1]],
      [
        [1, 0],
        [0, 1],
      ],
      [[1], [1]],
    ];
    const again = relinearize(first, { jacobians, residual: [3, 4] }, dimensionOf);
    expect(again).toEqual(whiten({ states: [0, 1, 0], jacobians, residual: [3, 4], ...noise }, dimensionOf));
    expect(() => relinearize(first, { jacobians, residual: [3] }, dimensionOf)).toThrow("residual of the measurement is of length 1");
  });
});

describe("a bad measurement is refused with the value and the mend", () => {
  const good: MeasurementInput = {
    states: [0, 1],
    jacobians: [
      [[1], [2]],
      [
        [1, 2],
        [3, 4],
      ],
    ],
    residual: [1, 2],
    standardDeviations: [1, 1],
    name: "level 7",
  };
  const { standardDeviations, ...bare } = good;
  test.each<[string, object, Record<string, unknown>]>([
    ["MEASUREMENT_SHAPE", { ...good, jacobians: [[[1], [2]]] }, { part: "jacobians" }],
    [
      "MEASUREMENT_SHAPE",
      {
        ...good,
        jacobians: [
          [[1], [2]],
          [[1, 2], [3]],
        ],
      },
      { part: "jacobians[1], row 1," },
    ],
    [
      "MEASUREMENT_SHAPE",
      {
        ...good,
        jacobians: [
          [[1], [2], [3]],
          [
            [1, 2],
            [3, 4],
          ],
        ],
      },
      { part: "jacobians[0]" },
    ],
    ["MEASUREMENT_SHAPE", { ...good, jacobians: [[[1], [2]], Float64Array.of(1, 2, 3)] }, { part: "jacobians[1]" }],
    [
      "MEASUREMENT_SHAPE",
      {
        ...good,
        jacobians: [
          [1, 2],
          [
            [1, 2],
            [3, 4],
          ],
        ],
      },
      { part: "jacobians[0], row 0," },
    ],
    [
      "MEASUREMENT_SHAPE",
      {
        ...good,
        jacobians: [
          undefined,
          [
            [1, 2],
            [3, 4],
          ],
        ],
      },
      { part: "jacobians[0]" },
    ],
    ["MEASUREMENT_SHAPE", { ...good, jacobians: undefined }, { part: "jacobians" }],
    ["MEASUREMENT_SHAPE", { ...good, states: 0 }, { part: "states" }],
    ["MEASUREMENT_SHAPE", { ...good, residual: 5 }, { part: "residual" }],
    ["MEASUREMENT_SHAPE", { ...good, standardDeviations: [1] }, { part: "standardDeviations" }],
    ["MEASUREMENT_SHAPE", { ...bare, covariance: [[1]] }, { part: "covariance" }],
    ["EMPTY_MEASUREMENT", { ...good, states: [], jacobians: [] }, { part: "states" }],
    ["EMPTY_MEASUREMENT", { ...good, residual: [] }, { part: "residual" }],
    [
      "MEASUREMENT_NOT_FINITE",
      {
        ...good,
        jacobians: [
          [[1], [2]],
          [
            [1, 2],
            [Number.NaN, 4],
          ],
        ],
      },
      { entry: "jacobians[1], row 1, column 0," },
    ],
    ["MEASUREMENT_NOT_FINITE", { ...good, residual: [1, Number.POSITIVE_INFINITY] }, { entry: "residual[1]" }],
    ["MEASUREMENT_NOT_FINITE", { ...good, standardDeviations: [Number.NaN, 1] }, { entry: "standardDeviations[0]" }],
    [
      "MEASUREMENT_NOT_FINITE",
      {
        ...bare,
        information: [
          [1, Number.NaN],
          [0, 1],
        ],
      },
      { entry: "information, row 0, column 1," },
    ],
    ["UNKNOWN_STATE", { ...good, states: [0, 9] }, { state: 9, where: 'states[1] of measurement "level 7"' }],
    ["NOISE_FORM", bare, { given: [] }],
    [
      "NOISE_FORM",
      {
        ...good,
        covariance: [
          [1, 0],
          [0, 1],
        ],
      },
      { given: ["covariance", "standardDeviations"] },
    ],
    ["STANDARD_DEVIATION", { ...good, standardDeviations: [1, 0] }, { row: 1, value: 0 }],
    ["STANDARD_DEVIATION", { ...good, standardDeviations: [-1, 1] }, { row: 0, value: -1 }],
    [
      "NOISE_NOT_SYMMETRIC",
      {
        ...bare,
        covariance: [
          [1, 0.5],
          [0.25, 1],
        ],
      },
      { form: "covariance", row: 1, column: 0, value: 0.25, mirrored: 0.5 },
    ],
    [
      "NOISE_NOT_POSITIVE_DEFINITE",
      {
        ...bare,
        covariance: [
          [1, 2],
          [2, 1],
        ],
      },
      { form: "covariance", row: 1, pivot: -3 },
    ],
    [
      "NOISE_NOT_POSITIVE_DEFINITE",
      {
        ...bare,
        information: [
          [0, 0],
          [0, 1],
        ],
      },
      { form: "information", row: 0, pivot: 0 },
    ],
    [
      "NOISE_NOT_POSITIVE_DEFINITE",
      {
        ...bare,
        covariance: [
          [0.01, 0.03],
          [0.03, 0.09],
        ],
      },
      { form: "covariance", row: 1 },
    ],
    ["WEIGHT_RANGE", { ...good, standardDeviations: [1, 1e-300] }, { row: 1 }],
    ["OPTION", { ...good, standardDeviation: [1, 1] }, { option: "standardDeviation" }],
  ])("%s: %j", (code, input, details) => {
    let thrown: unknown;
    try {
      whiten(input as MeasurementInput, dimensionOf);
    } catch (error) {
      thrown = error;
    }
    expect(thrown).toMatchObject({ code, details });
    if (code !== "OPTION") expect((thrown as Error).message).toContain("level 7");
  });
});
