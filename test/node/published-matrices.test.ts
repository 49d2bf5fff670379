// `sigmatide inverse` on published matrices, against references in 113-bit arithmetic that are kept outside the repository. Sources: the
// Harwell-Boeing collection (Duff, Grimes, Lewis 1989, ACM TOMS 15) and the SuiteSparse Matrix Collection.
import { spawnSync } from "node:child_process";
import { existsSync, readFileSync } from "node:fs";
import { fileURLToPath } from "node:url";
import { describe, expect, test } from "vitest";

const command = fileURLToPath(new URL("../../build/command.mjs", import.meta.url));
const folder = fileURLToPath(new URL("../../../shared/data/matrices/", import.meta.url));
const unit = Number.EPSILON / 2;

/** Relative error allowed on the diagonal of the inverse: 10 × condition × unit roundoff for a symmetric matrix. Normal equations are formed
 *  from A first, whose condition squares. Conditions: the ratio of the extreme eigenvalues by LAPACK, computed once; those of the
 *  surveying matrices as published (Paige, Saunders 1982). */
const matrices: { name: string; key: "inverseDiagonal" | "cofactorDiagonal"; condition: number }[] = [
  { name: "494_bus", key: "inverseDiagonal", condition: 2.4e6 },
  { name: "1138_bus", key: "inverseDiagonal", condition: 8.6e6 },
  { name: "gr_30_30", key: "inverseDiagonal", condition: 2e2 },
  { name: "bcsstk01", key: "inverseDiagonal", condition: 8.8e5 },
  { name: "bcsstk13", key: "inverseDiagonal", condition: 1.1e10 },
  { name: "Chem97ZtZ", key: "inverseDiagonal", condition: 2.5e2 },
  { name: "well1033", key: "cofactorDiagonal", condition: 166 ** 2 },
  { name: "well1850", key: "cofactorDiagonal", condition: 111 ** 2 },
  { name: "illc1850", key: "cofactorDiagonal", condition: 1405 ** 2 },
];

/** The same three by their rows, whose condition is not squared: cofactors as squares of the triangle's inverse. A dense orthogonal route in f64 reaches 2e-13. */
const byRows = ["well1033", "well1850", "illc1850"];

describe.skipIf(!existsSync(folder))("the diagonal of the inverse of published matrices (skipped when ../shared/data is absent)", () => {
  const errorsOf = (name: string, key: string, ...options: string[]): number[] => {
    const { status, stdout } = spawnSync(process.execPath, [command, "inverse", `${folder}${name}.mtx`, "--json", ...options], {
      encoding: "utf8",
    });
    expect(status).toBe(0);
    const actual: number[] = JSON.parse(stdout).diagonal;
    const reference: string[] = JSON.parse(readFileSync(`${folder}${name}.ref.json`, "utf8"))[key];
    expect(actual).toHaveLength(reference.length);
    return reference.map((digits, j) => Math.abs(actual[j]! / Number(digits) - 1));
  };
  for (const { name, key, condition } of matrices)
    test(name, () => {
      const route = key === "cofactorDiagonal" ? ["--route", "information"] : [];
      expect(Math.max(...errorsOf(name, key, ...route))).toBeLessThan(10 * condition * unit);
    });
  test.each(byRows)("%s by its rows, to 2e-12", (name) => {
    expect(Math.max(...errorsOf(name, "cofactorDiagonal", "--route", "orthogonal"))).toBeLessThan(2e-12);
  });
});
