import fc from "fast-check";
import { beforeAll, expect, test } from "vitest";
import { floatsAt, intoKernel, intsAt } from "../support/arrays.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

/** The lower triangle, columns with ascending rows, of the symmetric pattern on n unknowns with these off-diagonal entries. */
function lowerPattern(n: number, entries: Iterable<readonly [number, number]>, hasDiagonal: (j: number) => boolean) {
  const columns = Array.from({ length: n }, (_, j) => new Set(hasDiagonal(j) ? [j] : []));
  for (const [i, j] of entries) if (i !== j) columns[Math.min(i, j)]!.add(Math.max(i, j));
  const columnStart = new Int32Array(n + 1);
  columns.forEach((rows, j) => {
    columnStart[j + 1] = columnStart[j]! + rows.size;
  });
  const rowIndex = Int32Array.from(columns.flatMap((rows) => [...rows].sort((a, b) => a - b)));
  return { n, columnStart, rowIndex };
}
type Pattern = ReturnType<typeof lowerPattern>;

/** Runs the kernel and copies its answer out. Fields of Blocks and Graph lie in the order of their declaration. */
function blocksOf({ n, columnStart, rowIndex }: Pattern, sizes?: number[]) {
  const { raw } = kernel;
  const inputs = [intoKernel(kernel, columnStart), intoKernel(kernel, rowIndex), sizes ? intoKernel(kernel, Int32Array.from(sizes)) : 0];
  const blocks = raw.blocksOf!(n, inputs[0]!, inputs[1]!, inputs[2]!, sizes?.length ?? 0) >>> 0;
  expect(blocks).not.toBe(0);
  const [graph, unknowns, blockOf, blockStart, members] = intsAt(kernel, blocks, 5);
  const [count, start, adjacent, weight] = intsAt(kernel, graph!, 4);
  const ends = intsAt(kernel, start!, count! + 1);
  const answer = {
    count: count!,
    blockOf: intsAt(kernel, blockOf!, n),
    blockStart: intsAt(kernel, blockStart!, count! + 1),
    members: intsAt(kernel, members!, n),
    weight: intsAt(kernel, weight!, count!),
    neighbours: Array.from({ length: count! }, (_, b) => [...intsAt(kernel, adjacent! + 4 * ends[b]!, ends[b + 1]! - ends[b]!)]),
    padding: floatsAt(kernel, blocks + 24, 1)[0]!,
  };
  expect(unknowns).toBe(n);
  raw.releaseBlocks!(blocks);
  for (const address of inputs) raw.release!(address);
  return answer;
}

/** What follows from a partition, by the definition. */
function byDefinition({ n, columnStart, rowIndex }: Pattern, blockOf: ArrayLike<number>) {
  const count = n === 0 ? 0 : Math.max(...Array.from(blockOf)) + 1;
  const members = Array.from({ length: count }, (_, b) => Array.from({ length: n }, (_, j) => j).filter((j) => blockOf[j] === b));
  const sets = Array.from({ length: count }, () => new Set<number>());
  let offDiagonal = 0;
  for (let j = 0; j < n; j += 1)
    for (const i of rowIndex.subarray(columnStart[j], columnStart[j + 1])) {
      if (i !== j) offDiagonal += 1;
      if (blockOf[i] === blockOf[j]) continue;
      sets[blockOf[i]!]!.add(blockOf[j]!);
      sets[blockOf[j]!]!.add(blockOf[i]!);
    }
  const neighbours = sets.map((set) => [...set].sort((a, b) => a - b));
  const stored = members.reduce(
    (sum, own, b) => sum + own.length * (own.length - 1 + neighbours[b]!.reduce((s, c) => s + members[c]!.length, 0)),
    0,
  );
  return { members, neighbours, padding: stored / 2 - offDiagonal };
}

/** Blocks of columns with equal full patterns, numbered by their first column. */
function indistinguishable({ n, columnStart, rowIndex }: Pattern): number[] {
  const full = Array.from({ length: n }, (_, j) => new Set([j]));
  for (let j = 0; j < n; j += 1)
    for (const i of rowIndex.subarray(columnStart[j], columnStart[j + 1])) {
      full[i]!.add(j);
      full[j]!.add(i);
    }
  const seen = new Map<string, number>();
  return full.map((set) => {
    const key = [...set].sort((a, b) => a - b).join();
    if (!seen.has(key)) seen.set(key, seen.size);
    return seen.get(key)!;
  });
}

function check(pattern: Pattern, answer: ReturnType<typeof blocksOf>, blockOf: ArrayLike<number>) {
  const truth = byDefinition(pattern, blockOf);
  expect(Array.from(answer.blockOf)).toEqual(Array.from(blockOf));
  expect(answer.count).toBe(truth.members.length);
  expect(Array.from(answer.weight)).toEqual(truth.members.map((own) => own.length));
  expect(
    Array.from({ length: answer.count }, (_, b) => [...answer.members.subarray(answer.blockStart[b], answer.blockStart[b + 1])]),
  ).toEqual(truth.members);
  expect(answer.neighbours).toEqual(truth.neighbours);
  expect(answer.padding).toBe(truth.padding);
}

/** A random graph of blocks with its unknowns in shuffled or natural places. */
const blockPatterns = fc.integer({ min: 0, max: 9 }).chain((blocks) =>
  fc
    .record({
      sizes: fc.array(fc.integer({ min: 1, max: 4 }), { minLength: blocks, maxLength: blocks }),
      edges: fc.array(fc.tuple(fc.nat(Math.max(blocks - 1, 0)), fc.nat(Math.max(blocks - 1, 0))), { maxLength: blocks === 0 ? 0 : 12 }),
      shuffle: fc.boolean(),
      keys: fc.array(fc.nat(), { minLength: 36, maxLength: 36 }),
      diagonals: fc.constantFrom("all", "none", "even"),
    })
    .map(({ sizes, edges, shuffle, keys, diagonals }) => {
      const owner = sizes.flatMap((size, b) => new Array<number>(size).fill(b));
      const joined = new Set(edges.flatMap(([a, b]) => [`${a},${b}`, `${b},${a}`]));
      const n = owner.length;
      const places = Array.from({ length: n }, (_, j) => j);
      if (shuffle) places.sort((a, b) => keys[a]! - keys[b]!);
      const entries: [number, number][] = [];
      for (let i = 0; i < n; i += 1)
        for (let j = 0; j < i; j += 1)
          if (owner[i] === owner[j] || joined.has(`${owner[i]},${owner[j]}`)) entries.push([places[i]!, places[j]!]);
      return { sizes, pattern: lowerPattern(n, entries, (j) => diagonals === "all" || (diagonals === "even" && j % 2 === 0)) };
    }),
);

test("blocks are the classes of columns with equal patterns, and the graph is theirs, however the unknowns are numbered", () => {
  const before = kernel.raw.memoryUsed!();
  fc.assert(
    fc.property(blockPatterns, ({ pattern }) => {
      const answer = blocksOf(pattern);
      check(pattern, answer, indistinguishable(pattern));
      expect(answer.padding).toBe(0);
    }),
    { numRuns: 300 },
  );
  expect(kernel.raw.memoryUsed!()).toBe(before);
});

test("compression of any pattern leaves no explicit zero", () => {
  const patterns = fc
    .integer({ min: 1, max: 12 })
    .chain((n) => fc.tuple(fc.constant(n), fc.array(fc.tuple(fc.nat(n - 1), fc.nat(n - 1)), { maxLength: 3 * n })));
  fc.assert(
    fc.property(patterns, ([n, entries]) => {
      const pattern = lowerPattern(n, entries, () => true);
      const answer = blocksOf(pattern);
      check(pattern, answer, indistinguishable(pattern));
      expect(answer.padding).toBe(0);
    }),
    { numRuns: 300 },
  );
});

/** A path of blocks of 3, with `missing` of the entries between neighbouring blocks left out. */
function pathOfBlocks(blocks: number, missing: number) {
  const entries: [number, number][] = [];
  for (let a = 0; a < 3 * blocks; a += 1)
    for (let b = 0; b < a; b += 1) if (Math.floor(a / 3) - Math.floor(b / 3) <= 1) entries.push([a, b]);
  const between = entries.map(([a, b], at) => (Math.floor(a / 3) > Math.floor(b / 3) ? at : -1)).filter((at) => at >= 0);
  const drop = new Set(Array.from({ length: missing }, (_, k) => between[(k * 7) % between.length]));
  return lowerPattern(
    3 * blocks,
    entries.filter((_, at) => !drop.has(at)),
    () => true,
  );
}

test("given blocks are kept, with their union pattern, while few of their entries are zeros", () => {
  const pattern = pathOfBlocks(20, 4);
  const answer = blocksOf(pattern, new Array(20).fill(3));
  check(
    pattern,
    answer,
    Array.from({ length: 60 }, (_, j) => Math.floor(j / 3)),
  );
  expect(answer.padding).toBe(4);
});

test("given blocks whose columns differ too much give way to compression", () => {
  const pattern = pathOfBlocks(20, 40);
  const answer = blocksOf(pattern, new Array(20).fill(3));
  check(pattern, answer, indistinguishable(pattern));
  expect(answer.padding).toBe(0);
  expect(answer.count).toBeGreaterThan(20);
});

test("no memory: a null answer and nothing kept", () => {
  const { raw } = kernel;
  const { n, columnStart, rowIndex } = pathOfBlocks(200, 40);
  const inputs = [intoKernel(kernel, columnStart), intoKernel(kernel, rowIndex)] as const;
  const sizes = intoKernel(kernel, new Int32Array(200).fill(3));
  const before = raw.memoryUsed!();
  for (const given of [0, sizes]) {
    let refused = 0;
    for (let room = 0; room < 200_000; room += 1009) {
      raw.setMemoryLimit!(before + room);
      const blocks = raw.blocksOf!(n, ...inputs, given, 200) >>> 0;
      if (blocks) raw.releaseBlocks!(blocks);
      else refused += 1;
      expect(raw.memoryUsed!()).toBe(before);
    }
    expect(refused).toBeGreaterThan(10);
    expect(refused).toBeLessThan(199);
  }
  raw.setMemoryLimit!(2 ** 32);
  for (const address of [...inputs, sizes]) raw.release!(address);
});
