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

  assemblyBegin(
    states: number,
    sizes: number,
    measurements: number,
    readStart: number,
    reads: number,
    rows: number,
    numbers: number,
  ): number;
  assemblyAdvance(job: number, budget: number): number;
  assemblyProgress(job: number): number;
  assemblyRelease(job: number): void;
  assemblyOrder(job: number): number;
  assemblyColumnStart(job: number): number;
  assemblyRowIndex(job: number): number;
  assemblyValues(job: number): number;
  assemblyVector(job: number): number;
  assemblyStateOf(job: number): number;
  orderStates(symbolic: number, stateOf: number, sizes: number, stateOfSlot: number, dimensions: number): void;
  orderVector(symbolic: number, x: number, y: number): void;
  lowerDiagonal(order: number, columnStart: number, values: number, diagonal: number): void;

  rowListBegin(assembly: number): number;
  rowListAdvance(list: number, budget: number): number;
  rowListProgress(list: number): number;
  rowListRelease(list: number): void;
  rowListRows(list: number): number;
  rowListStart(list: number): number;
  rowListColumn(list: number): number;
  rowListValues(list: number): number;
  rowListRight(list: number): number;

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
  pivotSpread(factor: number, diagonal: number): number;
  weakestUnknown(factor: number, diagonal: number): number;
  reciprocalCondition(factor: number, columnStart: number, rowIndex: number, values: number): number;

  rowPlanCreate(symbolic: number, rows: number, rowStart: number, column: number): number;
  rowPlanRelease(plan: number): void;
  rowPlanFlops(plan: number): number;
  orthogonalBytes(plan: number): number;
  orthogonalBegin(factor: number, plan: number, values: number, right: number, squares: number): number;
  orthogonalAdvance(job: number, budget: number): number;
  orthogonalProgress(job: number): number;
  orthogonalPivot(job: number): number;
  orthogonalSolution(job: number, out: number): number;
  orthogonalTurned(job: number, out: number): void;
  orthogonalRelease(job: number): void;

  scaledConditionBegin(factor: number, diagonal: number): number;
  scaledConditionAdvance(job: number, budget: number): number;
  scaledConditionProgress(job: number): number;
  scaledConditionResult(job: number): number;
  scaledConditionRelease(job: number): void;

  solveBegin(factor: number, target: number, columns: number, units: number): number;
  solveAdvance(job: number, budget: number): number;
  solveProgress(job: number): number;
  solveRelease(job: number): void;
  inverseEntries(factor: number, rows: number, columns: number, count: number, out: number): number;
  inverseBlock(factor: number, unknowns: number, count: number, out: number): number;
  squaresBegin(factor: number, diagonal: number): number;
  squaresAdvance(job: number, budget: number): number;
  squaresProgress(job: number): number;
  squaresRelease(job: number): void;

  inverseBegin(factor: number, keepPanels: number): number;
  inverseAdvance(inverse: number, budget: number): number;
  inverseProgress(inverse: number): number;
  inverseRelease(inverse: number): void;
  inverseDiagonal(inverse: number): number;
  inverseOnMatrix(inverse: number, out: number): void;
  inverseFactorColumns(inverse: number, columnStart: number, rowIndex: number, values: number): number;

  symbolicOrder(symbolic: number): number;
  ledgerCreate(factor: number, slots: number, dimensions: number): number;
  ledgerRenew(ledger: number): void;
  ledgerRelease(ledger: number): void;
  ledgerX(ledger: number): number;
  ledgerGram(ledger: number): number;
  ledgerOwnGram(ledger: number): number;
  ledgerAdded(ledger: number): number;
  ledgerRemoved(ledger: number): number;
  ledgerEntries(ledger: number): number;
  ledgerBytes(ledger: number): number;
  ledgerFlops(ledger: number): number;
  ledgerLogDeterminant(ledger: number): number;
  strongestRow(ledger: number, since: number): number;
  addedGrowth(ledger: number): number;
  removedReach(ledger: number): number;
  removedGrowth(ledger: number): number;
  owedGrowth(ledger: number, since: number): number;
  innovationGrowth(ledger: number, plus: number, minus: number): number;
  addLeaf(ledger: number, dimension: number, count: number, parents: number, numbers: number, z: number): number;
  dropLeaves(ledger: number, slots: number): void;
  setRight(ledger: number, eta: number): number;
  setTurned(ledger: number, y: number): void;
  beginColumns(ledger: number, columns: number): number;
  loadBlock(ledger: number, from: number, rows: number, slot: number, block: number): void;
  loadUnits(ledger: number, from: number, slot: number): void;
  loadKept(ledger: number, since: number, rows: number): void;
  countAdded(ledger: number, count: number): number;
  carryForward(ledger: number): void;
  columnValues(ledger: number, value: number): void;
  carryBack(ledger: number): void;
  carryBackTo(ledger: number, slots: number, count: number): void;
  solveEstimate(ledger: number): number;
  clearColumns(ledger: number): void;
  enterRows(ledger: number, plus: number, minus: number, residual: number): number;
  settleRows(ledger: number, plus: number, minus: number): number;
  dropRow(ledger: number, id: number): void;
  factorInnovation(ledger: number, plus: number, minus: number): number;
  scaleColumns(ledger: number, rows: number): void;
  updateKept(
    ledger: number,
    plus: number,
    minus: number,
    fresh: number,
    target: number,
    arrivals: number,
    blocks: number,
    largest: number,
    column: number,
    lead: number,
  ): number;
  takeColumn(ledger: number, from: number, target: number, arrivals: number, column: number, lead: number): void;
  followLeaf(
    ledger: number,
    slot: number,
    places: number,
    blocks: number,
    column: number,
    lead: number,
    rows: number,
    scratch: number,
  ): void;
  extendColumn(ledger: number, slot: number, across: number, places: number, column: number, lead: number, scratch: number): void;
  blocksOfInverse(ledger: number, inverse: number, places: number, blocks: number): void;
  forgetPast(ledger: number, arrivals: number, blocks: number, largest: number): void;
  suspectStates(ledger: number, arrivals: number, blocks: number, largest: number, limit: number, list: number, room: number): number;
}

/** What kernel calls return; a positive number is 1 + the offending unknown. The same as assembly/memory/status.ts. */
export const status = { ok: 0, running: -1, outOfMemory: -2, tooLarge: -3 } as const;
