// Least-squares solutions of the surveying problems of Paige, Saunders (1982), ACM Trans. Math. Softw. 8, against references in quad arithmetic that are kept outside the
// repository (see published-matrices.ts), by both routes.
import { beforeAll, describe, expect, test } from "vitest";
import { leastSquares } from "../../src/index.js";
import { initFacade } from "../support/facade.js";
import { column, designMatrix, type LeastSquaresReference, publishedMatricesPresent, reference } from "../support/published-matrices.js";

beforeAll(initFacade);

const unit = Number.EPSILON / 2;

describe.skipIf(!publishedMatricesPresent)("surveying problems (skipped when ../shared/data is absent)", () => {
  // κ as published (Paige, Saunders 1982).
  test.each([
    { name: "well1033", condition: 166 },
    { name: "well1850", condition: 111 },
    { name: "illc1850", condition: 1405 },
  ])(
    "$name: the solution keeps the digits that κ leaves by the rows, κ² by the information, and nearly all refined",
    ({ name, condition }) => {
      const jacobian = designMatrix(`${name}.mtx`);
      const right = column(`${name}_rhs.mtx`);
      const { solution, degreesOfFreedom } = reference<LeastSquaresReference>(`${name}.ref.json`);
      const expected = solution.map(Number);
      const size = Math.max(...expected.map(Math.abs));
      const errorOf = (route: "orthogonal" | "information", refine: boolean) => {
        const found = leastSquares(jacobian, right, { route, refine });
        found.factor.dispose();
        expect(found.weightedSquares / degreesOfFreedom).toBeGreaterThan(0);
        return Math.max(...expected.map((v, j) => Math.abs(found.solution[j]! - v))) / size;
      };
      // Higham, theorem 20.1, for residuals that are small beside what is explained: κ roundings of a solution, some ten of them a row and column; by JᵀJ κ².
      expect(errorOf("orthogonal", false)).toBeLessThan(10 * unit * condition);
      expect(errorOf("information", false)).toBeLessThan(10 * unit * condition ** 2);
      for (const route of ["orthogonal", "information"] as const) expect(errorOf(route, true)).toBeLessThan(1e-15);
    },
  );
});
