// A real planar network: which counties touch, from the us-atlas package (ISC licence; US Census Bureau, cartographic boundary files).
import { neighbors } from "topojson-client";
import counties from "us-atlas/counties-10m.json";
import { beforeAll, expect, test } from "vitest";
import { factorize } from "../../src/index.js";
import { denseOf, inverseByCholesky } from "../support/dense.js";
import { initFacade } from "../support/facade.js";
import { type Graph, heldLaplacian, resistances } from "../support/resistors.js";

beforeAll(initFacade);

const regions = counties.objects.counties.geometries;
const touching = neighbors(regions);

/** The graph of some regions, in the order given, each edge once. */
function graphOf(chosen: readonly number[]): Graph {
  const place = new Map(chosen.map((region, k) => [region, k]));
  const edges = chosen.flatMap((region, k) =>
    touching[region]!.flatMap((other): [number, number][] => {
      const at = place.get(other);
      return at !== undefined && at > k ? [[k, at]] : [];
    }),
  );
  return { vertices: chosen.length, edges };
}

/** The largest connected part among some regions, in order of discovery. */
function largestPart(among: readonly number[]): number[] {
  const left = new Set(among);
  let largest: number[] = [];
  for (const start of among) {
    if (!left.delete(start)) continue;
    const part = [start];
    for (const region of part) for (const other of touching[region]!) if (left.delete(other)) part.push(other);
    if (part.length > largest.length) largest = part;
  }
  return largest;
}

const all = largestPart([...regions.keys()]);

test("the largest part has 3106 regions; effective resistances over all its edges add up to 3105 (Foster 1949)", () => {
  const graph = graphOf(all);
  expect(graph.vertices).toBe(3106);
  const factor = factorize(heldLaplacian(graph));
  const found = resistances(factor, graph.edges);
  // A resistance lies in (0, 1] beside its own unit resistor. κ of the held Laplacian is below 4 n · diameter ≈ 1e6 here.
  const bound = 1e6 * 2 ** -52;
  for (const r of found) {
    expect(r).toBeGreaterThan(0);
    expect(r).toBeLessThanOrEqual(1 + bound);
  }
  expect(Math.abs(found.reduce((sum, r) => sum + r, 0) - 3105)).toBeLessThan(3105 * bound);
  factor.dispose();
});

test("on the regions of single states all pairs agree with a dense library", () => {
  for (const state of ["48", "13", "51"]) {
    const part = largestPart([...regions.keys()].filter((k) => regions[k]!.id.startsWith(state)));
    expect(part.length).toBeGreaterThan(80);
    const graph = graphOf(part);
    const matrix = heldLaplacian(graph);
    const dense = inverseByCholesky(denseOf(matrix));
    const at = (a: number, b: number): number => (a < matrix.order && b < matrix.order ? dense.get(a, b) : 0);
    const pairs = part.flatMap((_, a) => part.slice(a + 1).map((__, b) => [a, a + 1 + b] as const));
    const factor = factorize(matrix);
    const bound = 1e5 * 2 ** -52;
    for (const [k, found] of resistances(factor, pairs).entries()) {
      const [a, b] = pairs[k]!;
      const expected = at(a, a) + at(b, b) - 2 * at(a, b);
      expect(Math.abs(found - expected)).toBeLessThan(bound * expected);
    }
    factor.dispose();
  }
});
