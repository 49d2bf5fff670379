// The kernel's way from a matrix to its factor, by raw calls: for tests of the kernel itself, on any build.
import { floatsAt, intoKernel, intsAt } from "./arrays.js";
import type { RawKernel } from "./kernel.js";

/** Lower triangle by columns, rows ascending. */
export interface LowerColumns {
  order: number;
  columnPointers: Int32Array;
  rowIndices: Int32Array;
  values: Float64Array;
}

const RUNNING = -1;

/** Runs an advance call to its end in slices of `budget` units and checks that progress never falls. */
function runSlices(advance: (budget: number) => number, progress: () => number, budget: number): number {
  let last = 0;
  for (;;) {
    const status = advance(budget);
    if (status !== RUNNING) return status;
    const now = progress();
    if (!(now >= last && now <= 1)) throw new Error(`progress went from ${last} to ${now}`);
    last = now;
  }
}

export class Pipeline {
  readonly addresses: number[] = [];
  readonly columnStart: number;
  readonly rowIndex: number;
  readonly values: number;
  readonly symbolic: number;
  readonly factor: number;
  readonly status: number;
  private readonly raw: RawKernel["raw"];

  constructor(
    readonly kernel: RawKernel,
    readonly matrix: LowerColumns,
    readonly options: { ordering?: number; given?: Int32Array; blockSizes?: Int32Array; queries?: number; budget?: number } = {},
  ) {
    const raw = kernel.raw;
    this.raw = raw;
    const budget = options.budget ?? Number.POSITIVE_INFINITY;
    this.columnStart = this.keep(matrix.columnPointers);
    this.rowIndex = this.keep(matrix.rowIndices);
    this.values = this.keep(matrix.values);
    const given = options.given ? this.keep(options.given) : 0;
    const sizes = options.blockSizes ? this.keep(options.blockSizes) : 0;
    const kind = options.ordering ?? (options.given ? 4 : 0);
    const job = raw.analysisBegin!(
      matrix.order,
      this.columnStart,
      this.rowIndex,
      options.blockSizes?.length ?? 0,
      sizes,
      kind,
      given,
      options.queries ?? 0,
    );
    const status = runSlices(
      (b) => raw.analysisAdvance!(job, b),
      () => raw.analysisProgress!(job),
      budget,
    );
    if (status !== 0) throw new Error(`analysis: status ${status}`);
    this.symbolic = raw.analysisFinish!(job);
    raw.analysisRelease!(job);
    this.factor = raw.factorCreate!(this.symbolic);
    raw.factorBegin!(this.factor, this.values);
    this.status = runSlices(
      (b) => raw.factorAdvance!(this.factor, b),
      () => raw.factorProgress!(this.factor),
      budget,
    );
  }

  private keep(values: Int32Array | Float64Array): number {
    const address = intoKernel(this.kernel, values);
    this.addresses.push(address);
    return address;
  }

  /** order[c] = caller's unknown eliminated c-th. */
  order(): Int32Array {
    return intsAt(this.kernel, this.raw.symbolicOrder!(this.symbolic), this.matrix.order);
  }

  solve(rightHandSides: Float64Array, columns: number, budget = Number.POSITIVE_INFINITY): Float64Array {
    const target = this.keep(rightHandSides);
    return this.runSolve(target, columns, 0, budget);
  }

  inverseColumns(units: Int32Array, budget = Number.POSITIVE_INFINITY): Float64Array {
    const target = this.keep(new Float64Array(units.length * this.matrix.order));
    return this.runSolve(target, units.length, this.keep(units), budget);
  }

  private runSolve(target: number, columns: number, units: number, budget: number): Float64Array {
    const raw = this.raw;
    const job = raw.solveBegin!(this.factor, target, columns, units);
    runSlices(
      (b) => raw.solveAdvance!(job, b),
      () => raw.solveProgress!(job),
      budget,
    );
    raw.solveRelease!(job);
    return floatsAt(this.kernel, target, columns * this.matrix.order);
  }

  inverseEntries(rows: Int32Array, columns: Int32Array): Float64Array {
    const out = this.keep(new Float64Array(rows.length));
    const status = this.raw.inverseEntries!(this.factor, this.keep(rows), this.keep(columns), rows.length, out);
    if (status !== 0) throw new Error(`inverseEntries: status ${status}`);
    return floatsAt(this.kernel, out, rows.length);
  }

  /** Diagonal, values at A's entries, and the whole pattern of L. */
  selectedInverse(budget = Number.POSITIVE_INFINITY): { diagonal: Float64Array; onMatrix: Float64Array; onFactor: LowerColumns } {
    const { raw, kernel } = this;
    const n = this.matrix.order;
    const z = raw.inverseBegin!(this.factor, 1);
    runSlices(
      (b) => raw.inverseAdvance!(z, b),
      () => raw.inverseProgress!(z),
      budget,
    );
    const diagonal = floatsAt(kernel, raw.inverseDiagonal!(z), n);
    const onMatrix = this.keep(new Float64Array(this.matrix.values.length));
    raw.inverseOnMatrix!(z, onMatrix);
    const entries = raw.factorEntries!(this.symbolic);
    const [start, rows, values] = [
      this.keep(new Int32Array(n + 1)),
      this.keep(new Int32Array(entries)),
      this.keep(new Float64Array(entries)),
    ];
    const status = raw.inverseFactorColumns!(z, start, rows, values);
    if (status !== 0) throw new Error(`inverseFactorColumns: status ${status}`);
    raw.inverseRelease!(z);
    return {
      diagonal,
      onMatrix: floatsAt(kernel, onMatrix, this.matrix.values.length),
      onFactor: {
        order: n,
        columnPointers: intsAt(kernel, start, n + 1),
        rowIndices: intsAt(kernel, rows, entries),
        values: floatsAt(kernel, values, entries),
      },
    };
  }

  logDeterminant(): number {
    return this.raw.logDeterminant!(this.factor);
  }

  reciprocalCondition(): number {
    return this.raw.reciprocalCondition!(this.factor, this.columnStart, this.rowIndex, this.values);
  }

  scaledCondition(budget = Number.POSITIVE_INFINITY): number {
    const { raw, matrix } = this;
    const diagonal = this.keep(Float64Array.from({ length: matrix.order }, (_, j) => matrix.values[matrix.columnPointers[j]!]!));
    const job = raw.scaledConditionBegin!(this.factor, diagonal);
    runSlices(
      (b) => raw.scaledConditionAdvance!(job, b),
      () => raw.scaledConditionProgress!(job),
      budget,
    );
    const estimate = raw.scaledConditionResult!(job);
    raw.scaledConditionRelease!(job);
    return estimate;
  }

  release(): void {
    this.raw.factorRelease!(this.factor);
    this.raw.symbolicRelease!(this.symbolic);
    for (const address of this.addresses) this.raw.release!(address);
  }
}

/** Marsaglia's xorshift (2003), 32 bits: repeatable networks from a seed. */
export const randomFrom = (seed: number) => {
  let state = seed | 1;
  return () => {
    state ^= state << 13;
    state ^= state >>> 17;
    state ^= state << 5;
    return (state >>> 0) / 2 ** 32;
  };
};

/** A random sparse symmetric positive definite matrix: `Aᵀ A`-like sums of small blocks on random pairs of states, plus a diagonal.
 * full: each state's own block holds all its entries, so that its unknowns share one pattern. */
export function randomNetwork(random: () => number, states: number, dimension: number, ties: number, full = false): LowerColumns {
  const n = states * dimension;
  const dense = new Map<number, number>();
  const add = (i: number, j: number, v: number) => {
    if (i >= j) dense.set(j * n + i, (dense.get(j * n + i) ?? 0) + v);
  };
  for (let i = 0; i < n; i += 1) add(i, i, 0.5 + random());
  for (let t = full ? -states : 0; t < ties; t += 1) {
    const pair = t < 0 ? [t + states] : [Math.floor(random() * states), Math.floor(random() * states)];
    const unknowns = pair.flatMap((s) => Array.from({ length: dimension }, (_, d) => s * dimension + d));
    for (let row = 0; row < dimension; row += 1) {
      const jacobian = unknowns.map(() => 2 * random() - 1);
      for (const [a, i] of unknowns.entries()) for (const [b, j] of unknowns.entries()) add(i, j, jacobian[a]! * jacobian[b]!);
    }
  }
  return lowerFrom(n, dense);
}

/** Columns from entries by column × order + row. */
export function lowerFrom(order: number, entries: ReadonlyMap<number, number>): LowerColumns {
  const keys = [...entries.keys()].sort((a, b) => a - b);
  const columnPointers = new Int32Array(order + 1);
  for (const key of keys) columnPointers[Math.floor(key / order) + 1]! += 1;
  for (let j = 0; j < order; j += 1) columnPointers[j + 1]! += columnPointers[j]!;
  return {
    order,
    columnPointers,
    rowIndices: Int32Array.from(keys, (key) => key % order),
    values: Float64Array.from(keys, (key) => entries.get(key)!),
  };
}

/** The full dense matrix, row by row. */
export function toDense({ order, columnPointers, rowIndices, values }: LowerColumns): number[][] {
  const rows = Array.from({ length: order }, () => new Array<number>(order).fill(0));
  for (let j = 0; j < order; j += 1) {
    for (let p = columnPointers[j]!; p < columnPointers[j + 1]!; p += 1) {
      rows[rowIndices[p]!]![j] = values[p]!;
      rows[j]![rowIndices[p]!] = values[p]!;
    }
  }
  return rows;
}
