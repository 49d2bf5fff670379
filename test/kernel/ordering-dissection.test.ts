import fc from "fast-check";
import { beforeAll, describe, expect, test } from "vitest";
import { chain, eliminate, graphIntoKernel, graphOf, grid, kinds, orderGraph, type TestGraph } from "../support/graphs.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const ascending = (order: ArrayLike<number>) => Array.from(order).sort((a, b) => a - b);
const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

/** Graphs large enough to be cut: some grids side by side, vertices renumbered, some edges at random (too few for a hub), weights of 1 to 6. */
const graphs = fc
  .record({
    parts: fc.array(fc.tuple(fc.integer({ min: 1, max: 30 }), fc.integer({ min: 3, max: 30 })), { minLength: 1, maxLength: 4 }),
    extra: fc.array(fc.tuple(fc.nat(), fc.nat()), { maxLength: 35 }),
    weight: fc.array(fc.integer({ min: 1, max: 6 }), { minLength: 10, maxLength: 10 }),
    turn: fc.constantFrom(1, 7919),
  })
  .map(({ parts, extra, weight, turn }): TestGraph => {
    const n = parts.reduce((sum, [w, h]) => sum + w * h, 0);
    const place = (v: number) => (n % turn === 0 ? v : (v * turn) % n);
    const edges: [number, number][] = extra.map(([a, b]) => [a % n, b % n]);
    let first = 0;
    for (const [w, h] of parts) {
      const part = grid(w, h);
      for (let v = 0; v < part.n; v += 1)
        for (const u of part.adjacent.subarray(part.start[v], part.start[v + 1])) edges.push([place(first + v), place(first + u)]);
      first += part.n;
    }
    return graphOf(
      n,
      edges,
      upTo(n).map((v) => weight[v % 10]!),
    );
  });

describe("nested dissection", () => {
  test("every graph gets a permutation, the same one whatever the slices; predicted counts are those of elimination", () => {
    const before = kernel.raw.memoryUsed!();
    fc.assert(
      fc.property(graphs, fc.integer({ min: 1, max: 100_000 }), (graph, budget) => {
        for (const kind of ["minimumDegree", "nestedDissection"] as const) {
          const { order, predicted } = orderGraph(kernel, graph, kind);
          expect(ascending(order)).toEqual(upTo(graph.n));
          expect(orderGraph(kernel, graph, kind, { budget }).order).toEqual(order);
          const truth = eliminate(graph, order);
          expect(predicted.nonzeros).toBe(truth.nonzeros);
          expect(predicted.flops / truth.flops).toBeCloseTo(1, 12);
          // A parent may be taken for one nearer to the leaves, never nearer to the root.
          expect(predicted.path / truth.path).toBeGreaterThan(1 - 1e-12);
        }
      }),
      { numRuns: 40 },
    );
    expect(kernel.raw.memoryUsed!()).toBe(before);
  });

  test("on a 300 × 300 grid it needs fewer flops than George's nested dissection, and than minimum degree", () => {
    const graph = grid(300, 300);
    const { order, predicted } = orderGraph(kernel, graph, "nestedDissection");
    const { flops, path } = eliminate(graph, order);
    expect(predicted.path).toBeLessThan(1.2 * path); // measured 1.13
    const degree = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
    // George, Liu, "Computer Solution of Large Sparse Positive Definite Systems" (1981), ch. 8: 829/84 n³ multiplications to leading
    // order, which is half of Σ (column count)².
    expect(flops).toBeLessThan(2 * (829 / 84) * 300 ** 3);
    expect(flops).toBeLessThan(0.7 * degree.flops); // measured 0.58
    expect(path).toBeLessThan(0.8 * degree.path); // measured 0.63
  });

  test("a cylinder, two grids apart, a nine-point grid and a complete graph come out well", () => {
    const ring = graphOf(4000, [
      ...upTo(4000).map((v) => [v, v % 40 === 39 ? v - 39 : v + 1] as const),
      ...upTo(3960).map((v) => [v, v + 40] as const),
    ]);
    for (const graph of [ring, grid(60, 60, true)]) {
      const dissected = eliminate(graph, orderGraph(kernel, graph, "nestedDissection").order);
      const degree = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
      expect(dissected.flops).toBeLessThan(1.15 * degree.flops);
      expect(dissected.path).toBeLessThan(degree.path);
    }
    const one = grid(40, 40);
    const two = graphOf(3200, [
      ...upTo(1600).flatMap((v) => [...one.adjacent.subarray(one.start[v], one.start[v + 1])].map((u) => [v, u] as const)),
      ...upTo(1600).flatMap((v) => [...one.adjacent.subarray(one.start[v], one.start[v + 1])].map((u) => [1600 + v, 1600 + u] as const)),
    ]);
    const apart = eliminate(two, orderGraph(kernel, two, "nestedDissection").order);
    const single = eliminate(one, orderGraph(kernel, one, "nestedDissection").order);
    expect(apart.flops).toBeLessThan(2.2 * single.flops);

    const complete = graphOf(
      320,
      upTo(320 * 320).map((k) => [k % 320, Math.floor(k / 320)] as const),
    );
    expect(eliminate(complete, orderGraph(kernel, complete, "nestedDissection").order).nonzeros).toBe((320 * 321) / 2);
  });

  test("a large graph is ordered in many slices, and the progress rises to 1", () => {
    const { progress } = orderGraph(kernel, grid(200, 200), "nestedDissection", { budget: 1e6 });
    expect(progress.length).toBeGreaterThan(25);
    expect(progress[0]).toBe(0);
    expect(progress.at(-1)).toBe(1);
    for (const [k, share] of progress.entries()) if (k > 0) expect(share).toBeGreaterThanOrEqual(progress[k - 1]!);
    expect(progress[Math.floor(progress.length / 2)]).toBeGreaterThan(0.2);
    expect(progress[Math.floor(progress.length / 2)]).toBeLessThan(0.8);
  });

  test("a job given up at any stage, and one that runs out of memory, give everything back", () => {
    const { raw } = kernel;
    const copy = graphIntoKernel(kernel, grid(60, 60));
    const before = raw.memoryUsed!();
    for (let steps = 0; steps < 400; steps += 7) {
      const job = raw.orderingBegin!(copy.address, kinds.automatic, 0, 1, 0, 1e6);
      for (let k = 0; k < steps; k += 1) raw.orderingAdvance!(job, 20_000);
      raw.orderingRelease!(job);
      expect(raw.memoryUsed!()).toBe(before);
    }
    const outcomes = new Set<number>();
    for (let room = 0; room < 2_500_000; room += 25_013) {
      raw.setMemoryLimit!(before + room);
      const job = raw.orderingBegin!(copy.address, kinds.automatic, 0, 1, 0, 1e6);
      let status = -2;
      if (job !== 0) {
        do status = raw.orderingAdvance!(job, 1e18);
        while (status === -1);
        raw.orderingRelease!(job);
      }
      outcomes.add(status);
      expect(raw.memoryUsed!()).toBe(before);
    }
    raw.setMemoryLimit!(2 ** 32);
    copy.free();
    expect([...outcomes].sort()).toEqual([-2, 0]);
  });
});

describe("the automatic order", () => {
  test("is minimum degree for a single factor of a small-effort graph, dissection once queries pay for it", () => {
    const graph = grid(120, 120);
    const degree = orderGraph(kernel, graph, "minimumDegree").order;
    const dissection = orderGraph(kernel, graph, "nestedDissection").order;
    const once = orderGraph(kernel, graph, "automatic", { demand: [1, 0, 0] });
    expect(once.chosen).toBe(kinds.minimumDegree);
    expect(once.order).toEqual(degree);
    const often = orderGraph(kernel, graph, "automatic", { demand: [1, 0, 100_000] });
    expect(often.chosen).toBe(kinds.nestedDissection);
    expect(often.order).toEqual(dissection);
  });

  test("keeps the order of the smaller predicted work, whatever is asked", () => {
    for (const graph of [grid(50, 50), chain(3000, 3), grid(600, 4), grid(45, 45, true)])
      for (const demand of [
        [1, 0, 0],
        [100, 0, 0],
        [1, 100, 0],
        [1, 1, 1e6],
      ] as const) {
        const work = (kind: "automatic" | "minimumDegree" | "nestedDissection") => {
          const { predicted } = orderGraph(kernel, graph, kind, { demand });
          const factor = predicted.flops / 18 + 3 * predicted.nonzeros;
          return (demand[0] + 2.3 * demand[1]) * factor + demand[2] * 1.5 * predicted.path * graph.weight[0]!;
        };
        const [automatic, degree, dissection] = [work("automatic"), work("minimumDegree"), work("nestedDissection")];
        expect(automatic).toBeLessThanOrEqual(degree);
        // It dissects when a fifth of the work passes what that costs, 130 units for each of 7 levels and each entry of the graph at most.
        if (degree > 5 * 130 * 7 * graph.start[graph.n]!) expect(automatic).toBeLessThanOrEqual(dissection);
      }
  });
});
