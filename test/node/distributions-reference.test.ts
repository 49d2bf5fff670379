// Every row of the shared table of reference values (distributions.json: statistic or probability, degrees of freedom, …, reference).
import { existsSync, readFileSync } from "node:fs";
import { expect, test } from "vitest";
import { chiSquare, type Distribution, fisherF, noncentralChiSquare, normal, studentT } from "../../src/decide/distributions.js";

const path = new URL("../../../shared/data/distributions.json", import.meta.url);
const present = existsSync(path);
if (!present) console.warn(`skipped: no reference table at ${path.pathname}`);

type Row = [number, number | [number, number], ...number[]];
const table: Record<string, Row[]> = present ? JSON.parse(readFileSync(path, "utf8")) : {};

// Two values a row: in the F rows the last, in the others the one before it equals a 50-digit evaluation to the printed digits.
const families: [string, (row: Row) => Distribution, number][] = [
  ["chi", (row) => chiSquare(row[1] as number), -2],
  ["n", () => normal, -2],
  ["t", (row) => studentT(row[1] as number), -2],
  ["f", (row) => fisherF(...(row[1] as [number, number])), -1],
];

for (const [name, distribution, column] of families)
  test.skipIf(!present)(`${name}: cdf and quantile of every row to 12 digits`, () => {
    let rows = 0;
    for (const kind of ["cdf", "q"] as const)
      for (const row of table[`${name}_${kind}`]!) {
        const reference = row.at(column) as number;
        const value = kind === "cdf" ? distribution(row).cdf(row[0]) : distribution(row).quantile(row[0]);
        // 2.9e−316 is a subnormal with 9 digits; zeros are below the smallest double and must be zeros here
        const relative = Math.abs(reference) < 1e-300 ? 1e-8 : 1e-12;
        expect(Math.abs(value - reference), `${name} ${kind} ${row}`).toBeLessThanOrEqual(relative * Math.abs(reference));
        rows += 1;
      }
    expect(rows).toBeGreaterThanOrEqual(24);
  });

// The rows without a second opinion were summed to an absolute bound: far out they hold 8 digits (distributions.test.ts has those values anew).
test.skipIf(!present)("non-central chi-square: cdf of every row to 12 digits", () => {
  for (const row of table.ncx2 as unknown as [number, number, number, number | null, number][]) {
    const [x, degrees, lambda, second, reference] = row;
    expect(Math.abs(noncentralChiSquare(degrees, lambda).cdf(x) - reference), `${row}`).toBeLessThanOrEqual(
      (second === null ? 1e-8 : 1e-12) * reference,
    );
  }
});
