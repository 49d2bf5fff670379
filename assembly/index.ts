// The kernel's exports: numbers and memory, nothing else.
export {
  allocate, release, setMemoryLimit, memoryLimit, memoryUsed, memoryPeak, memoryCapacity,
} from "./memory/heap";
export function isFused(): bool { return ASC_FEATURE_RELAXED_SIMD; }
export { blocksOf, releaseBlocks } from "./ordering/compress";
export {
  orderingBegin, orderingAdvance, orderingProgress, orderingChosen, orderingPrediction, orderingFinish, orderingRelease,
} from "./ordering/ordering";
export { eliminationTree, postorder } from "./symbolic/tree";
export { columnCounts } from "./symbolic/counts";
export { multiply } from "./dense/multiply";
export { multiplyTransposed, multiplyTransposedLower } from "./dense/multiply-transposed";
export { rankUpdateLower } from "./dense/rank-update";
export { factorPanel } from "./dense/factor-panel";
export { solveRight, solveRightTransposed } from "./dense/solve-right";
export { solveLower, solveLowerMany, solveLowerTransposed, solveLowerTransposedMany } from "./dense/solve-left";
export { inverseOfProduct, inverseScratch } from "./dense/inverse-of-product";
export { axpy, dot, subtractProduct, subtractTransposedProduct } from "./dense/vector";
export { mirror, transposeInto } from "./dense/transpose";
export {
  assemblyBegin, assemblyAdvance, assemblyProgress, assemblyRelease, assemblyOrder, assemblyColumnStart, assemblyRowIndex, assemblyValues,
  assemblyVector, assemblyStateOf,
} from "./information/assemble";
export {
  rowListBegin, rowListAdvance, rowListProgress, rowListRelease, rowListRows, rowListStart, rowListColumn, rowListValues, rowListRight,
} from "./information/rows";
export { orderStates, orderVector, lowerDiagonal } from "./information/slots";
export { analysisBegin, analysisAdvance, analysisProgress, analysisFinish, analysisFactorBytes, analysisRelease } from "./symbolic/analysis";
export { releaseSymbolic as symbolicRelease } from "./symbolic/symbolic";
export {
  symbolicOrder, symbolicNonzeros, symbolicFlops, symbolicSupernodes, symbolicOrdering, symbolicBytes, factorBytes, inverseBytes,
} from "./symbolic/facts";
export {
  factorCreate, factorRelease, factorBegin, factorAdvance, factorProgress, factorPivot, logDeterminant, pivotSpread, weakestUnknown,
} from "./factor/cholesky";
export { solveBegin, solveAdvance, solveProgress, solveRelease } from "./solve/solve";
export { inverseEntries } from "./solve/entries";
export { inverseBlock } from "./solve/block";
export { squaresBegin, squaresAdvance, squaresProgress, squaresRelease } from "./solve/squares";
export { inverseBegin, inverseAdvance, inverseProgress, inverseRelease, inverseDiagonal } from "./inverse/selected-inverse";
export { inverseOnMatrix, inverseFactorColumns, factorEntries } from "./inverse/pattern";
export { reciprocalCondition } from "./condition";
export {
  scaledConditionBegin, scaledConditionAdvance, scaledConditionProgress, scaledConditionResult, scaledConditionRelease,
} from "./scaled-condition";
export { ledgerCreate, ledgerRenew, ledgerRelease } from "./ledger/ledger";
export { addLeaf, dropLeaves } from "./ledger/leaves";
export {
  beginColumns, setRight, setTurned, loadBlock, loadUnits, carryForward, columnValues, carryBack, carryBackTo, clearColumns, loadKept,
  countAdded, solveEstimate,
} from "./ledger/columns";
export { enterRows, settleRows, dropRow } from "./ledger/rows";
export {
  factorInnovation, scaleColumns, updateKept, takeColumn, followLeaf, extendColumn, blocksOfInverse, forgetPast,
  suspectStates,
} from "./ledger/tracked";
export {
  ledgerX, ledgerGram, ledgerOwnGram, ledgerAdded, ledgerRemoved, ledgerEntries, ledgerBytes, ledgerFlops, ledgerLogDeterminant, strongestRow,
  addedGrowth, removedReach, removedGrowth, owedGrowth, innovationGrowth,
} from "./ledger/facts";
export { householderScratch, triangularize } from "./dense/householder";
export { rowPlanCreate, rowPlanRelease, rowPlanFlops } from "./symbolic/row-plan";
export {
  orthogonalBytes, orthogonalBegin, orthogonalAdvance, orthogonalProgress, orthogonalRelease, orthogonalPivot, orthogonalSolution,
  orthogonalTurned,
} from "./factor/orthogonal";
