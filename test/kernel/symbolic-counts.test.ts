import fc from "fast-check";
import { beforeAll, expect, test } from "vitest";
import { emptyInts, intoKernel, intsAt } from "../support/arrays.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

/** Elimination by the definition: the columns of L of a symmetric pattern, eliminated in natural order. */
function eliminate(n: number, edges: [number, number][]) {
  const columns = Array.from({ length: n }, () => new Set<number>());
  for (const [a, b] of edges) if (a !== b) columns[Math.min(a, b)]!.add(Math.max(a, b));
  const parent = new Int32Array(n).fill(-1);
  for (let j = 0; j < n; j += 1) {
    const below = [...columns[j]!].sort((a, b) => a - b);
    if (below.length === 0) continue;
    parent[j] = below[0]!;
    for (const i of below.slice(1)) columns[below[0]!]!.add(i);
  }
  return { parent, columns };
}

const graphs = fc.integer({ min: 0, max: 14 }).chain((n) =>
  fc.record({
    n: fc.constant(n),
    edges: fc.array(fc.tuple(fc.nat(Math.max(n - 1, 0)), fc.nat(Math.max(n - 1, 0))), { maxLength: n === 0 ? 0 : 2 * n }),
    weights: fc.array(fc.integer({ min: 1, max: 5 }), { minLength: n, maxLength: n }),
  }),
);

test("elimination tree, postorder and weighted column counts equal those of elimination by the definition", () => {
  const { raw } = kernel;
  const before = raw.memoryUsed!();
  fc.assert(
    fc.property(graphs, ({ n, edges, weights }) => {
      const lists = Array.from({ length: n }, () => ({ earlier: new Set<number>(), later: new Set<number>() }));
      for (const [a, b] of edges) {
        if (a === b) continue;
        lists[Math.max(a, b)]!.earlier.add(Math.min(a, b));
        lists[Math.min(a, b)]!.later.add(Math.max(a, b));
      }
      const pack = (half: "earlier" | "later") => {
        const start = new Int32Array(n + 1);
        const flat = lists.flatMap((list, k) => {
          start[k + 1] = start[k]! + list[half].size;
          return [...list[half]];
        });
        return [intoKernel(kernel, start), intoKernel(kernel, Int32Array.from(flat))] as const;
      };
      const [earlierStart, earlier] = pack("earlier");
      const [laterStart, later] = pack("later");
      const weight = intoKernel(kernel, Int32Array.from(weights));
      const [parent, post, count, scratch] = [emptyInts(kernel, n), emptyInts(kernel, n), emptyInts(kernel, n), emptyInts(kernel, 4 * n)];
      raw.eliminationTree!(n, earlierStart, earlier, parent, scratch);
      raw.postorder!(n, parent, post, scratch, scratch + 4 * n);
      raw.columnCounts!(n, parent, post, laterStart, later, weight, count, scratch);
      const truth = eliminate(n, edges);
      const found = { parent: intsAt(kernel, parent, n), post: intsAt(kernel, post, n), count: intsAt(kernel, count, n) };
      for (const address of [earlierStart, earlier, laterStart, later, weight, parent, post, count, scratch]) raw.release!(address);

      expect(found.parent).toEqual(truth.parent);
      const position = new Int32Array(n);
      found.post.forEach((j, t) => {
        position[j] = t;
      });
      expect(Array.from(found.post).sort((a, b) => a - b)).toEqual(Array.from({ length: n }, (_, k) => k));
      for (let j = 0; j < n; j += 1) if (truth.parent[j]! >= 0) expect(position[j]).toBeLessThan(position[truth.parent[j]!]!);
      const expected = truth.columns.map((rows, j) => weights[j]! + [...rows].reduce((sum, i) => sum + weights[i]!, 0));
      expect(Array.from(found.count)).toEqual(expected);
    }),
  );
  expect(raw.memoryUsed!()).toBe(before);
});
