// The kernel's exports: numbers and memory, nothing else.
export {
  allocate, release, setMemoryLimit, memoryLimit, memoryUsed, memoryPeak, resetMemoryPeak, memoryCapacity,
} from "./memory/heap";
export function isFused(): bool { return ASC_FEATURE_RELAXED_SIMD; }
export { permuteGraph, releaseHalves } from "./symbolic/halves";
export { eliminationTree, postorder } from "./symbolic/tree";
export { columnCounts } from "./symbolic/counts";
export { blocksOf, releaseBlocks } from "./ordering/compress";
