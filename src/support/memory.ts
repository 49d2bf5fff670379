import { kernel } from "../../bindings/loader.js";
import { requireIndex } from "./checks.js";

/** WebAssembly's 4 GiB less a page. */
const LARGEST = 65535 * 65536;

/** Kernel memory of this thread, in bytes. */
export interface MemoryUsage {
  used: number;
  /** The most that was in use at once. */
  peak: number;
  /** What WebAssembly holds: it grows and never shrinks while the instance lives, and what is freed is used again. */
  capacity: number;
  /** The most that may be in use at once. */
  limit: number;
}

/** Kernel memory of this thread. To return all of it to the system, end the thread (a worker) that holds the instance.
 *  @throws {NotInitializedError} */
export function memoryUsage(): MemoryUsage {
  const k = kernel();
  return { used: k.memoryUsed(), peak: k.memoryPeak(), capacity: k.memoryCapacity(), limit: k.memoryLimit() };
}

/** Sets the most bytes of kernel memory that may be in use at once on this thread. Work that would pass it is refused with
 *  `MemoryLimitError` before it starts.
 *  @throws {IndexRangeError | NotInitializedError} */
export function setMemoryLimit(bytes: number): void {
  requireIndex("bytes", bytes, 0, LARGEST);
  kernel().setMemoryLimit(bytes);
}
