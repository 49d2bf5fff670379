// The kernel's exports: numbers and memory, nothing else.
export {
  allocate, release, setMemoryLimit, memoryLimit, memoryUsed, memoryPeak, resetMemoryPeak, memoryCapacity,
} from "./memory/heap";
export function isFused(): bool { return ASC_FEATURE_RELAXED_SIMD; }
export { blocksOf, releaseBlocks } from "./ordering/compress";
export { orderingBegin, orderingAdvance, orderingFinish, orderingRelease } from "./ordering/ordering";
export { permuteGraph, releaseHalves } from "./symbolic/halves";
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
