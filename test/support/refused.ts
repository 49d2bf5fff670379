// A call under every limit of memory, from none left to enough.
import { expect } from "vitest";
import { memoryUsage, setMemoryLimit } from "../../src/index.js";

/** How often `call` was refused while its room grew by `step` bytes a time until it went through. Each refusal has to be the typed error,
 *  and to leave nothing held. */
export function refusedUntilThereIsRoom(call: () => void, step: number): number {
  const { used, limit } = memoryUsage();
  let refused = 0;
  try {
    for (let room = 0; ; room += step) {
      setMemoryLimit(used + room);
      try {
        call();
        return refused;
      } catch (error) {
        expect(error).toMatchObject({ code: "MEMORY_LIMIT" });
        refused += 1;
      }
      expect(memoryUsage().used).toBe(used);
    }
  } finally {
    setMemoryLimit(limit);
  }
}
