// The most multiply-adds that one thread of WebAssembly does on this machine, measured in the same run as what is compared with it.
import { loops } from "./loops.js";
import { measure } from "./timing.js";

let known: number | undefined;

/** GFlop/s of f64x2 multiply and add in twelve independent sums. */
export function peakRate(time: number): number {
  const rounds = 100_000;
  // 12 sums × 2 lanes × 2 operations; the fastest quarter, as this is a bound.
  known ??= (48 * rounds) / measure(() => loops().peak!(rounds), { time }).low / 1e6;
  return known;
}
