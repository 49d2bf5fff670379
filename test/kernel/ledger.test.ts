import fc from "fast-check";
import { inverse, Matrix } from "ml-matrix";
import { beforeAll, expect, test } from "vitest";
import { floatsAt, intoKernel } from "../support/arrays.js";
import { type RawKernel, rawKernel } from "../support/kernel.js";
import { Pipeline, randomFrom, randomNetwork, toDense } from "../support/pipeline.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

/** The same system twice: as the kernel's ledger, and as a dense information matrix in position order. */
class Twin {
  readonly base: Pipeline;
  readonly ledger: number;
  readonly positions: number[] = [0];
  information: Matrix;
  vector: number[];
  /** Rows in the ledger by sign, as dense rows with their residual. */
  readonly added: { row: number[]; residual: number }[] = [];
  readonly removed: { row: number[]; residual: number }[] = [];

  constructor(
    readonly random: () => number,
    states: number,
    readonly dimension: number,
  ) {
    const matrix = randomNetwork(random, states, dimension, 2 * states, true);
    this.base = new Pipeline(kernel, matrix, { blockSizes: new Int32Array(states).fill(dimension) });
    const order = this.base.order();
    const dense = new Matrix(toDense(matrix));
    const n = matrix.order;
    this.information = new Matrix(
      Array.from({ length: n }, (_, a) => Array.from({ length: n }, (_, b) => dense.get(order[a]!, order[b]!))),
    );
    this.vector = Array.from({ length: n }, () => random() - 0.5);
    for (let s = 1; s <= states; s += 1) this.positions.push(s * dimension);
    const sizes = this.keep(new Int32Array(states).fill(dimension));
    this.ledger = kernel.raw.ledgerCreate!(this.base.factor, states, sizes);
    expect(kernel.raw.setRight!(this.ledger, this.keep(Float64Array.from(this.vector)))).toBe(0);
  }

  keep(values: Int32Array | Float64Array): number {
    const address = intoKernel(kernel, values);
    this.base.addresses.push(address);
    return address;
  }
  get slots(): number {
    return this.positions.length - 1;
  }
  dimensionOf(slot: number): number {
    return this.positions[slot + 1]! - this.positions[slot]!;
  }
  anySlots(count: number): number[] {
    const chosen = new Set<number>();
    while (chosen.size < Math.min(count, this.slots)) chosen.add(Math.floor(this.random() * this.slots));
    return [...chosen];
  }

  addLeaf(dimension: number, parents: number[]): void {
    const { random } = this;
    const lower = Array.from({ length: dimension }, (_, j) =>
      Array.from({ length: dimension }, (_, i) => (i < j ? 0 : i === j ? 0.5 + random() : random() - 0.5)),
    );
    const blocks = parents.map((p) =>
      Array.from({ length: this.dimensionOf(p) }, () => Array.from({ length: dimension }, () => random() - 0.5)),
    );
    const z = Array.from({ length: dimension }, () => random() - 0.5);
    const numbers = [...lower.flat(), ...blocks.flat(2)];
    const { raw } = kernel;
    const arguments_ = [this.keep(Int32Array.from(parents)), this.keep(Float64Array.from(numbers)), this.keep(Float64Array.from(z))];
    expect(raw.addLeaf!(this.ledger, dimension, parents.length, ...arguments_)).toBe(0);
    const first = this.positions.at(-1)!;
    const n = first + dimension;
    this.positions.push(n);
    const grown = Matrix.zeros(n, n);
    grown.setSubMatrix(this.information, 0, 0);
    this.information = grown;
    this.vector.push(...new Array<number>(dimension).fill(0));
    for (const { row } of [...this.added, ...this.removed]) row.push(...new Array<number>(dimension).fill(0));
    for (let r = 0; r < dimension; r += 1) {
      const row = new Array<number>(n).fill(0);
      for (let j = 0; j < dimension; j += 1) row[first + j] = lower[r]![j]!; // R = Lᵀ
      for (const [k, p] of parents.entries())
        for (let j = 0; j < this.dimensionOf(p); j += 1) row[this.positions[p]! + j] = blocks[k]![j]![r]!;
      this.accumulate(row, z[r]!, 1);
    }
  }

  accumulate(row: number[], residual: number, sign: number): void {
    for (const [i, a] of row.entries()) {
      if (a === 0) continue;
      this.vector[i]! += sign * a * residual;
      for (const [j, b] of row.entries()) if (b !== 0) this.information.set(i, j, this.information.get(i, j) + sign * a * b);
    }
  }

  randomRow(scale = 1): { row: number[]; residual: number } {
    const row = new Array<number>(this.positions.at(-1)!).fill(0);
    for (const slot of this.anySlots(2))
      for (let p = this.positions[slot]!; p < this.positions[slot + 1]!; p += 1) row[p] = scale * (2 * this.random() - 1);
    return { row, residual: this.random() - 0.5 };
  }

  load(rows: number[][], units: number[] = []): void {
    const { raw } = kernel;
    const unitColumns = units.reduce((sum, slot) => sum + this.dimensionOf(slot), 0);
    expect(raw.beginColumns!(this.ledger, rows.length + unitColumns)).toBe(0);
    for (let slot = 0; slot < this.slots; slot += 1) {
      const range = Array.from({ length: this.dimensionOf(slot) }, (_, u) => this.positions[slot]! + u);
      if (rows.some((row) => range.some((p) => row[p] !== 0))) {
        const block = range.flatMap((p) => rows.map((row) => row[p]!));
        raw.loadBlock!(this.ledger, 0, rows.length, slot, this.keep(Float64Array.from(block)));
      }
    }
    let from = rows.length;
    for (const slot of units) {
      raw.loadUnits!(this.ledger, from, slot);
      from += this.dimensionOf(slot);
    }
  }

  /** Σ and x of the dense twin. */
  truth(): { covariance: Matrix; estimate: number[] } {
    const covariance = inverse(this.information);
    return { covariance, estimate: covariance.mmul(Matrix.columnVector(this.vector)).to1DArray() };
  }

  release(): void {
    kernel.raw.ledgerRelease!(this.ledger);
    this.base.release();
  }
}

const scenarios = fc.record({
  seed: fc.integer({ min: 1, max: 2 ** 30 }),
  states: fc.integer({ min: 1, max: 12 }),
  dimension: fc.integer({ min: 1, max: 3 }),
  steps: fc.array(fc.constantFrom("leaf", "rows", "remove", "both", "drop"), { minLength: 1, maxLength: 9 }),
});

/** Both sides work on matrices of condition below 1e5 (checked); forward errors stay below c n ε κ with c n < 1e4. */
const TOLERANCE = 1e4 * Number.EPSILON * 1e5;

test("base, leaves and ledger answer like a dense matrix after any sequence of arrivals and withdrawals, and tracked numbers follow", () => {
  const { raw, memory } = kernel;
  const before = raw.memoryUsed!();
  fc.assert(
    fc.property(scenarios, ({ seed, states, dimension, steps }) => {
      const twin = new Twin(randomFrom(seed), states, dimension);
      const { ledger } = twin;
      // Tracked: all blocks and the newest column; set once from the truth, then only ever updated.
      let { covariance, estimate } = twin.truth();
      const blocksOf = (sigma: Matrix) =>
        Array.from({ length: twin.slots }, (_, s) => {
          const p = twin.positions[s]!;
          return Array.from({ length: twin.dimensionOf(s) ** 2 }, (_, k) =>
            sigma.get(p + (k % twin.dimensionOf(s)), p + Math.floor(k / twin.dimensionOf(s))),
          );
        }).flat();
      const columnOf = (sigma: Matrix, slot: number) =>
        Array.from({ length: twin.dimensionOf(slot) }, (_, j) =>
          Array.from({ length: twin.positions.at(-1)! }, (_, p) => sigma.get(p, twin.positions[slot]! + j)),
        ).flat();
      let blocks: Float64Array = Float64Array.from(blocksOf(covariance));
      let newest = twin.slots - 1;
      let column: Float64Array = Float64Array.from(columnOf(covariance, newest));
      /** Slots in the order in which they came: their own. */
      const places = () => {
        const table = new Int32Array(2 * twin.slots);
        for (let s = 0, block = 0; s < twin.slots; block += twin.dimensionOf(s) ** 2, s += 1) table.set([block, twin.positions[s]!], 2 * s);
        return twin.keep(table);
      };
      const arrivals = () => twin.keep(Int32Array.from({ length: twin.slots }, (_, s) => s));

      for (const step of steps) {
        if (step === "leaf") {
          const single = twin.random() < 0.5;
          const parents = single ? [newest] : twin.anySlots(2);
          const d = 1 + Math.floor(twin.random() * 3);
          twin.addLeaf(d, parents);
          const slot = twin.slots - 1;
          const n = twin.positions.at(-1)!;
          const across = twin.dimensionOf(newest);
          const before = n - d;
          const lead = n + 3; // more than the rows, as when there is room for more
          const kept = new Float64Array(lead * Math.max(d, across));
          for (let j = 0; j < across; j += 1) kept.set(column.subarray(j * before, (j + 1) * before), j * lead);
          const next = twin.keep(kept);
          const grown = twin.keep(new Float64Array([...blocks, ...new Float64Array(d * d)]));
          if (single) {
            raw.followLeaf!(ledger, slot, places(), grown, next, lead, before, twin.keep(new Float64Array(64)));
          } else {
            // The column of the state before goes on to the new one, too.
            raw.extendColumn!(ledger, slot, across, places(), next, lead, twin.keep(new Float64Array(16)));
            const extended = floatsAt(kernel, next, kept.length);
            const expected = columnOf(twin.truth().covariance, newest);
            const size = Math.max(...expected.map(Math.abs));
            for (let j = 0; j < across; j += 1)
              for (let p = before; p < n; p += 1)
                expect(Math.abs(extended[j * lead + p]! - expected[j * n + p]!)).toBeLessThanOrEqual(TOLERANCE * size);
            twin.load([], [slot]);
            raw.carryForward!(ledger);
            new Float64Array(memory.buffer, grown + 8 * blocks.length, d * d).set(floatsAt(kernel, raw.ledgerGram!(ledger), d * d));
            raw.carryBack!(ledger);
            raw.takeColumn!(ledger, 0, slot, arrivals(), next, lead);
            raw.clearColumns!(ledger);
          }
          const made = floatsAt(kernel, next, kept.length);
          column = Float64Array.from(Array.from({ length: d }, (_, j) => [...made.subarray(j * lead, j * lead + n)]).flat());
          blocks = floatsAt(kernel, grown, blocks.length + d * d);
          ({ covariance, estimate } = twin.truth());
          newest = slot;
        } else if (step === "drop") {
          if (twin.removed.length > 0 || twin.added.length === 0) continue;
          const id = Math.floor(twin.random() * twin.added.length);
          const [gone] = twin.added.splice(id, 1);
          // Tracked numbers take it as a removed row; the ledger forgets it.
          twin.load([gone!.row]);
          raw.carryForward!(ledger);
          updateTracked(0, 1);
          raw.dropRow!(ledger, id);
          twin.accumulate(gone!.row, gone!.residual, -1);
        } else {
          const arriving = step === "remove" ? [] : [twin.randomRow(), twin.randomRow()];
          const leaving = step === "rows" || twin.added.length === 0 ? [] : [twin.added[Math.floor(twin.random() * twin.added.length)]!];
          if (leaving.some((row) => twin.removed.includes(row)) || arriving.length + leaving.length === 0) continue;
          const rows = [...arriving, ...leaving];
          twin.load(rows.map(({ row }) => row));
          raw.carryForward!(ledger);
          const residuals = rows.map(({ residual }) => residual);
          expect(raw.enterRows!(ledger, arriving.length, leaving.length, twin.keep(Float64Array.from(residuals)))).toBe(0);
          updateTracked(arriving.length, leaving.length);
          expect(raw.settleRows!(ledger, arriving.length, leaving.length)).toBe(0);
          for (const { row, residual } of arriving) twin.accumulate(row, residual, 1);
          for (const { row, residual } of leaving) twin.accumulate(row, residual, -1);
          twin.added.push(...arriving);
          twin.removed.push(...leaving);
        }
        if (!check()) break;
      }
      twin.release();

      function blocksFrom(slot: number): number {
        let at = 0;
        for (let s = 0; s < slot; s += 1) at += twin.dimensionOf(s) ** 2;
        return at;
      }

      function updateTracked(plus: number, minus: number): void {
        const rows = plus + minus;
        expect(raw.factorInnovation!(ledger, plus, minus)).toBe(0);
        raw.scaleColumns!(ledger, rows);
        raw.carryBack!(ledger);
        const [b, c] = [twin.keep(blocks), twin.keep(column)];
        const traces = Array.from({ length: twin.slots }, (_, s) => {
          const at = blocksFrom(s);
          const d = twin.dimensionOf(s);
          return Array.from({ length: d }, (_unused, k) => blocks[at + k * (d + 1)]!).reduce((sum, v) => sum + v, 0);
        });
        const largest = twin.keep(Float64Array.from(traces));
        const ratio = raw.updateKept!(ledger, plus, minus, -1, newest, arrivals(), b, largest, c, twin.positions.at(-1)!);
        const now = floatsAt(kernel, b, blocks.length);
        const ratios = traces.map((past, s) => {
          const at = blocksFrom(s);
          const d = twin.dimensionOf(s);
          return past / Array.from({ length: d }, (_unused, k) => now[at + k * (d + 1)]!).reduce((sum, v) => sum + v, 0);
        });
        expect(ratio / Math.max(1, ...ratios)).toBeCloseTo(1, 12);
        raw.clearColumns!(ledger);
        blocks = floatsAt(kernel, b, blocks.length);
        column = floatsAt(kernel, c, column.length);
      }

      /** False, and nothing checked, once the random system has become too ill-conditioned for the tolerance. */
      function check(): boolean {
        ({ covariance, estimate } = twin.truth());
        const scale = covariance.norm("max");
        if (!(scale * twin.information.norm("max") * covariance.rows < 1e5)) return false;
        const near = (found: number, expected: number, size = scale) =>
          expect(Math.abs(found - expected)).toBeLessThanOrEqual(TOLERANCE * size);
        blocksOf(covariance).forEach((v, k) => {
          near(blocks[k]!, v);
        });
        columnOf(covariance, newest).forEach((v, k) => {
          near(column[k]!, v);
        });
        expect(raw.solveEstimate!(ledger)).toBe(0);
        const x = floatsAt(kernel, raw.ledgerX!(ledger), estimate.length);
        raw.clearColumns!(ledger);
        const sizeOfX = Math.max(1, ...estimate.map(Math.abs));
        estimate.forEach((v, k) => {
          near(x[k]!, v, sizeOfX);
        });
        // A linear function of states, without a backward solve; and a partial backward solve.
        const probe = [twin.randomRow(), twin.randomRow()].map(({ row }) => row);
        twin.load(probe);
        raw.carryForward!(ledger);
        const gram = floatsAt(kernel, raw.ledgerGram!(ledger), 4);
        const a = new Matrix(probe);
        const expected = a.mmul(covariance).mmul(a.transpose());
        for (let k = 0; k < 4; k += 1) near(gram[k]!, expected.get(k >> 1, k & 1), 16 * scale);
        const values = twin.keep(new Float64Array(2));
        raw.columnValues!(ledger, values);
        floatsAt(kernel, values, 2).forEach((v, q) => {
          near(
            v,
            probe[q]!.reduce((sum, c, p) => sum + c * estimate[p]!, 0),
            16 * sizeOfX,
          );
        });
        const wanted = twin.anySlots(2);
        raw.carryBackTo!(ledger, twin.keep(Int32Array.from(wanted)), wanted.length);
        const product = covariance.mmul(a.transpose());
        const found = floatsAt(kernel, raw.ledgerX!(ledger), 2 * twin.positions.at(-1)!);
        for (const slot of wanted)
          for (let p = twin.positions[slot]!; p < twin.positions[slot + 1]!; p += 1)
            for (let q = 0; q < 2; q += 1) near(found[2 * p + q]!, product.get(p, q), 16 * scale);
        raw.clearColumns!(ledger);
        return true;
      }
    }),
    { numRuns: 150 },
  );
  expect(raw.memoryUsed!()).toBe(before);
});
