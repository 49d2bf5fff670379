import fc from "fast-check";
import { beforeAll, describe, expect, test } from "vitest";
import { chain, eliminate, graphIntoKernel, graphOf, grid, kinds, orderGraph, star } from "../support/graphs.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

const ascending = (order: ArrayLike<number>) => Array.from(order).sort((a, b) => a - b);
const upTo = (n: number) => Array.from({ length: n }, (_, k) => k);

const graphs = fc.integer({ min: 0, max: 60 }).chain((n) =>
  fc
    .record({
      edges: fc.array(fc.tuple(fc.nat(Math.max(n - 1, 0)), fc.nat(Math.max(n - 1, 0))), { maxLength: n === 0 ? 0 : 4 * n }),
      weight: fc.array(fc.integer({ min: 1, max: 6 }), { minLength: n, maxLength: n }),
    })
    .map(({ edges, weight }) => graphOf(n, edges, weight)),
);

describe("minimum degree", () => {
  test("every graph gets a permutation, the same one whatever the slices, and all memory comes back", () => {
    const before = kernel.raw.memoryUsed!();
    fc.assert(
      fc.property(graphs, fc.integer({ min: 1, max: 3000 }), (graph, budget) => {
        const whole = orderGraph(kernel, graph, "minimumDegree");
        expect(ascending(whole.order)).toEqual(upTo(graph.n));
        expect(orderGraph(kernel, graph, "minimumDegree", { budget }).order).toEqual(whole.order);
      }),
      { numRuns: 200 },
    );
    expect(kernel.raw.memoryUsed!()).toBe(before);
  });

  test("graphs that fill nothing in some order fill nothing: trees, chains, stars, complete graphs, no edges", () => {
    const random = (k: number) => (Math.imul(k + 1, 2654435761) >>> 0) / 2 ** 32;
    const tree = graphOf(
      500,
      upTo(499).map((k) => [k + 1, Math.floor(random(k) * (k + 1))] as const),
    );
    const complete = graphOf(
      60,
      upTo(3600).map((k) => [k % 60, Math.floor(k / 60)] as const),
    );
    for (const graph of [star(300), complete, graphOf(7, []), graphOf(1, []), graphOf(0, [])]) {
      const { nonzeros } = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
      expect(nonzeros).toBe(graph.n + graph.start[graph.n]! / 2);
    }
    // Independent passes trade fill for a shallow tree: an eliminated vertex of degree 2 leaves one edge.
    for (const graph of [tree, chain(1000)]) {
      const { nonzeros } = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
      expect(nonzeros).toBeLessThanOrEqual(3 * graph.n);
    }
  });

  test("a chain of n states has an elimination tree no deeper than 2 log₂ n: every query walks a logarithmic path", () => {
    for (const n of [100, 1000, 30000]) {
      const graph = chain(n, 3);
      const { parent } = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
      const depth = new Int32Array(n);
      for (let k = n - 1; k >= 0; k -= 1) depth[k] = parent[k]! >= 0 ? depth[parent[k]!]! + 1 : 1;
      expect(Math.max(...depth)).toBeLessThanOrEqual(2 * Math.log2(n));
    }
  });

  test("a hub tied to everything goes last and leaves the fill of the rest as it was", () => {
    const plain = grid(40, 40);
    const hub = graphOf(1601, [
      ...upTo(1600).flatMap((v) => [...plain.adjacent.subarray(plain.start[v], plain.start[v + 1])].map((u) => [v, u] as const)),
      ...upTo(1600).map((v) => [v, 1600] as const),
    ]);
    const { order } = orderGraph(kernel, hub, "minimumDegree");
    expect(order[1600]).toBe(1600);
    const without = eliminate(plain, orderGraph(kernel, plain, "minimumDegree").order);
    expect(eliminate(hub, order).nonzeros).toBe(without.nonzeros + 1601);
  });

  test("on a grid, fill stays near that of the exact minimum degree found by hand", () => {
    const graph = grid(20, 20);
    const lists = upTo(400).map((v) => new Set(graph.adjacent.subarray(graph.start[v], graph.start[v + 1])));
    const exact: number[] = [];
    const left = new Set(upTo(400));
    while (left.size > 0) {
      const v = [...left].reduce((a, b) => (lists[b]!.size < lists[a]!.size ? b : a));
      left.delete(v);
      exact.push(v);
      for (const a of lists[v]!) {
        lists[a]!.delete(v);
        for (const b of lists[v]!) if (a !== b) lists[a]!.add(b);
      }
    }
    const ours = eliminate(graph, orderGraph(kernel, graph, "minimumDegree").order);
    // Ties alone move minimum degree by some 10 % on a grid (George, Liu, "The evolution of the minimum degree ordering algorithm", 1989).
    expect(ours.nonzeros).toBeLessThan(1.1 * eliminate(graph, exact).nonzeros);
  });

  test("a job given up at any stage, and one that runs out of memory, give everything back", () => {
    const { raw } = kernel;
    const graph = grid(30, 30);
    const copy = graphIntoKernel(kernel, graph);
    const before = raw.memoryUsed!();
    for (let steps = 0; steps < 60; steps += 3) {
      const job = raw.orderingBegin!(copy.address, kinds.minimumDegree, 0, 1, 0, 0);
      for (let k = 0; k < steps; k += 1) raw.orderingAdvance!(job, 2000);
      raw.orderingRelease!(job);
      expect(raw.memoryUsed!()).toBe(before);
    }
    const outcomes = new Set<string>();
    for (let room = 0; room < 400_000; room += 5003) {
      raw.setMemoryLimit!(before + room);
      const job = raw.orderingBegin!(copy.address, kinds.minimumDegree, 0, 1, 0, 0);
      if (job === 0) outcomes.add("refused");
      else {
        outcomes.add(`status ${raw.orderingAdvance!(job, 1e18)}`);
        raw.orderingRelease!(job);
      }
      expect(raw.memoryUsed!()).toBe(before);
    }
    raw.setMemoryLimit!(2 ** 32);
    copy.free();
    expect([...outcomes].sort()).toEqual(["refused", "status -1", "status -2"]);
  });

  test("natural and given orders pass through", () => {
    const graph = grid(5, 4);
    const given = upTo(20).map((k) => (7 * k + 3) % 20);
    expect([...orderGraph(kernel, graph, "natural").order]).toEqual(upTo(20));
    expect([...orderGraph(kernel, graph, "given", { budget: 1, given }).order]).toEqual(given);
  });
});
