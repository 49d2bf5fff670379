// The kernel's exports: numbers and memory, nothing else.
export {
  allocate, release, setMemoryLimit, memoryLimit, memoryUsed, memoryPeak, resetMemoryPeak, memoryCapacity,
} from "./memory/heap";
export function isFused(): bool { return ASC_FEATURE_RELAXED_SIMD; }
