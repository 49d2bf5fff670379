// The loops of assembly/bench/dense-loops.ts around the dense kernels, in a module built once a run.
import { type BenchModule, benchModule } from "./bench-module.js";

let built: BenchModule | undefined;

function module(): BenchModule {
  built ??= benchModule("assembly/bench/dense-loops.ts");
  return built;
}

export const loops = (): BenchModule["calls"] => module().calls;
export const loopsMemory = (): WebAssembly.Memory => module().memory;
