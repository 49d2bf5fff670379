import { inverse as denseInverse, Matrix } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { quayPrecision } from "../../src/demo/print.js";
import { coordinateDifferences, heightDifferences, pillars, points } from "../../src/demo/quay.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

test("the invented network names points that exist and states positive precisions", () => {
  const known = [...pillars, ...points];
  expect(new Set(known).size).toBe(known.length);
  for (const { from, to } of [...coordinateDifferences, ...heightDifferences]) expect(known).toEqual(expect.arrayContaining([from, to]));
  for (const { east, north } of coordinateDifferences) expect(Math.min(east, north)).toBeGreaterThan(0);
});

test("its standard deviations agree with a dense library's inverse of each axis's weights", () => {
  const precision = quayPrecision();
  for (const axis of ["east", "north", "height"] as const) {
    // A levelling net on each axis: the matrix of a weighted graph whose pillars are taken out (Kirchhoff 1847).
    const size = points.length;
    const weights = Matrix.zeros(size, size);
    const legs = [...coordinateDifferences, ...(axis === "height" ? heightDifferences : [])] as ({ from: string; to: string } & Record<
      typeof axis,
      number
    >)[];
    for (const leg of legs) {
      const weight = 1 / leg[axis] ** 2;
      const ends = [points.indexOf(leg.from), points.indexOf(leg.to)].filter((k) => k >= 0);
      for (const a of ends) for (const b of ends) weights.set(a, b, weights.get(a, b) + (a === b ? weight : -weight));
    }
    const inverse = denseInverse(weights);
    // Condition below 1e3, order 12: 12 × 1e3 × 1.1e-16 and a factor of 10.
    for (const row of precision) {
      const k = points.indexOf(row.point);
      expect(Math.abs(row[axis] / Math.sqrt(inverse.get(k, k)) - 1)).toBeLessThan(1.4e-11);
    }
  }
});
