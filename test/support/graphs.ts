// Graphs of states for tests of the ordering, and elimination by the definition as the truth about an order.
import { floatsAt, intoKernel, intsAt } from "./arrays.js";
import type { RawKernel } from "./kernel.js";

export interface TestGraph {
  n: number;
  start: Int32Array;
  adjacent: Int32Array;
  weight: Int32Array;
}

/** The graph with these edges, whatever their order and direction; loops and repeats are dropped. */
export function graphOf(n: number, edges: Iterable<readonly [number, number]>, weight: number | ArrayLike<number> = 1): TestGraph {
  const lists = Array.from({ length: n }, () => new Set<number>());
  for (const [a, b] of edges) {
    if (a === b) continue;
    lists[a]!.add(b);
    lists[b]!.add(a);
  }
  const start = new Int32Array(n + 1);
  lists.forEach((list, v) => {
    start[v + 1] = start[v]! + list.size;
  });
  const adjacent = new Int32Array(start[n]!);
  lists.forEach((list, v) => {
    adjacent.set(Int32Array.from(list).sort(), start[v]);
  });
  return { n, start, adjacent, weight: typeof weight === "number" ? new Int32Array(n).fill(weight) : Int32Array.from(weight) };
}

/** Five-point grid, or nine-point with `diagonals`. */
export function grid(width: number, height: number, diagonals = false): TestGraph {
  const edges: [number, number][] = [];
  for (let y = 0; y < height; y += 1)
    for (let x = 0; x < width; x += 1)
      for (const [dx, dy] of diagonals
        ? [
            [1, 0],
            [0, 1],
            [1, 1],
            [-1, 1],
          ]
        : [
            [1, 0],
            [0, 1],
          ]) {
        const [u, v] = [x + dx!, y + dy!];
        if (u >= 0 && u < width && v < height) edges.push([y * width + x, v * width + u]);
      }
  return graphOf(width * height, edges);
}

export const chain = (n: number, weight = 1): TestGraph =>
  graphOf(
    n,
    Array.from({ length: Math.max(n - 1, 0) }, (_, v) => [v, v + 1] as const),
    weight,
  );

export const star = (leaves: number): TestGraph =>
  graphOf(
    leaves + 1,
    Array.from({ length: leaves }, (_, v) => [0, v + 1] as const),
  );

/** The factor of the graph eliminated in `order`, by the definition: column k holds its later neighbours and what its children hold
 *  beyond themselves. Counts are over unknowns; flops are the sum of the squares of the column counts; `path` is the mean over
 *  unknowns of the entries of L in whole block columns on the way to the root. */
export function eliminate({ n, start, adjacent, weight }: TestGraph, order: ArrayLike<number>) {
  const place = new Int32Array(n);
  for (let k = 0; k < n; k += 1) place[order[k]!] = k;
  const rows: Int32Array[] = [];
  const children: number[][] = Array.from({ length: n }, () => []);
  const parent = new Int32Array(n).fill(-1);
  const mark = new Int32Array(n).fill(-1);
  const entries = new Float64Array(n);
  let [nonzeros, flops, unknowns, path] = [0, 0, 0, 0];
  for (let k = 0; k < n; k += 1) {
    const own: number[] = [];
    const add = (i: number) => {
      if (i <= k || mark[i] === k) return;
      mark[i] = k;
      own.push(i);
    };
    const v = order[k]!;
    for (let p = start[v]!; p < start[v + 1]!; p += 1) add(place[adjacent[p]!]!);
    for (const child of children[k]!) {
      rows[child]!.forEach(add);
      rows[child] = new Int32Array(0); // not needed again
    }
    rows[k] = Int32Array.from(own);
    if (own.length > 0) {
      parent[k] = own.reduce((a, b) => Math.min(a, b));
      children[parent[k]!]!.push(k);
    }
    const below = own.reduce((sum, i) => sum + weight[order[i]!]!, 0);
    for (let c = 1; c <= weight[v]!; c += 1) {
      entries[k]! += below + c;
      flops += (below + c) ** 2;
    }
    nonzeros += entries[k]!;
    unknowns += weight[v]!;
  }
  for (let k = n - 1; k >= 0; k -= 1) {
    if (parent[k]! >= 0) entries[k]! += entries[parent[k]!]!;
    path += entries[k]! * weight[order[k]!]!;
  }
  return { nonzeros, flops, path: unknowns > 0 ? path / unknowns : 0, parent };
}

/** Copies a graph into kernel memory; `free` gives it back. */
export function graphIntoKernel(kernel: RawKernel, { n, start, adjacent, weight }: TestGraph) {
  const arrays = [intoKernel(kernel, start), intoKernel(kernel, adjacent), intoKernel(kernel, weight)];
  const address = intoKernel(kernel, Int32Array.from([n, ...arrays]));
  const free = () => {
    for (const each of [address, ...arrays]) kernel.raw.release!(each);
  };
  return { address, free };
}

/** Kinds of order, as the kernel numbers them. */
export const kinds = { automatic: 0, minimumDegree: 1, nestedDissection: 2, natural: 3, given: 4 } as const;

/** What an order is for: factorizations, selected inverses, queries. */
export type Demand = readonly [number, number, number];

/** Orders a graph in slices of `budget`. Gives what the kernel predicts of the order and how the progress went. */
export function orderGraph(
  kernel: RawKernel,
  graph: TestGraph,
  kind: keyof typeof kinds,
  { budget = 1e18, given, demand = [1, 0, 0] }: { budget?: number; given?: ArrayLike<number>; demand?: Demand } = {},
) {
  const { raw } = kernel;
  const copy = graphIntoKernel(kernel, graph);
  const list = given ? intoKernel(kernel, Int32Array.from(given)) : 0;
  const job = raw.orderingBegin!(copy.address, kinds[kind], list, ...demand) >>> 0;
  if (job === 0) throw new Error("no memory");
  const progress: number[] = [raw.orderingProgress!(job)];
  let status = -1;
  while (status === -1) {
    status = raw.orderingAdvance!(job, budget);
    progress.push(raw.orderingProgress!(job));
  }
  if (status !== 0) throw new Error(`status ${status}`);
  const [nonzeros, flops, path] = floatsAt(kernel, raw.orderingPrediction!(job), 3);
  const chosen = raw.orderingChosen!(job);
  const address = raw.orderingFinish!(job);
  const order = intsAt(kernel, address, graph.n);
  raw.release!(address);
  raw.release!(list);
  copy.free();
  return { order, progress, chosen, predicted: { nonzeros: nonzeros!, flops: flops!, path: path! } };
}
