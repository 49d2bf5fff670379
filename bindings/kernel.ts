// What the kernel exports, typed by hand. Every address is a byte offset into `memory`, every matrix column-major; counts that can pass
// 2³¹ come as f64. An address above 2 GiB reaches JavaScript as a negative number: `>>> 0` mends it.

/** The exports of assembly/index.ts that the facade calls. */
export interface KernelExports {
  readonly memory: WebAssembly.Memory;
  isFused(): number;

  allocate(bytes: number): number;
  release(address: number): void;
  setMemoryLimit(bytes: number): void;
  memoryLimit(): number;
  memoryUsed(): number;
  memoryPeak(): number;
  memoryCapacity(): number;

  analysisBegin(
    order: number,
    columnStart: number,
    rowIndex: number,
    blockCount: number,
    blockSizes: number,
    ordering: number,
    givenOrder: number,
    queries: number,
  ): number;
  analysisAdvance(job: number, budget: number): number;
  analysisProgress(job: number): number;
  analysisFinish(job: number): number;
  analysisFactorBytes(job: number): number;
  analysisRelease(job: number): void;
  symbolicNonzeros(symbolic: number): number;
  symbolicFlops(symbolic: number): number;
  symbolicSupernodes(symbolic: number): number;
  symbolicOrdering(symbolic: number): number;
  symbolicBytes(symbolic: number): number;
  symbolicRelease(symbolic: number): void;
  factorBytes(symbolic: number): number;
  inverseBytes(symbolic: number, keepPanels: number): number;
  factorEntries(symbolic: number): number;

  factorCreate(symbolic: number): number;
  factorBegin(factor: number, values: number): void;
  factorAdvance(factor: number, budget: number): number;
  factorProgress(factor: number): number;
  factorPivot(factor: number): number;
  factorRelease(factor: number): void;
  logDeterminant(factor: number): number;
  reciprocalCondition(factor: number, columnStart: number, rowIndex: number, values: number): number;

  solveBegin(factor: number, target: number, columns: number, units: number): number;
  solveAdvance(job: number, budget: number): number;
  solveProgress(job: number): number;
  solveRelease(job: number): void;
  inverseEntries(factor: number, rows: number, columns: number, count: number, out: number): number;

  inverseBegin(factor: number, keepPanels: number): number;
  inverseAdvance(inverse: number, budget: number): number;
  inverseProgress(inverse: number): number;
  inverseRelease(inverse: number): void;
  inverseDiagonal(inverse: number): number;
  inverseOnMatrix(inverse: number, out: number): void;
  inverseFactorColumns(inverse: number, columnStart: number, rowIndex: number, values: number): number;
}

/** What kernel calls return; a positive number is 1 + the offending unknown. The same as assembly/memory/status.ts. */
export const status = { ok: 0, running: -1, outOfMemory: -2, tooLarge: -3 } as const;
