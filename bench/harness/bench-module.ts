// AssemblyScript that the bench alone needs, built for this run into a module with its own memory.
import { execFileSync } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";

export interface BenchModule {
  readonly memory: WebAssembly.Memory;
  readonly calls: Readonly<Record<string, (...args: number[]) => number>>;
}

const options =
  "--config none --runtime stub --importMemory --initialMemory 16 --maximumMemory 65535 --noAssert -O3 --converge --enable simd".split(" ");

export function benchModule(source: string): BenchModule {
  const folder = mkdtempSync(join(tmpdir(), "bench-module-"));
  const file = join(folder, "module.wasm");
  try {
    execFileSync("npx", ["asc", source, ...options, "-o", file], { stdio: ["ignore", "ignore", "inherit"] });
    const memory = new WebAssembly.Memory({ initial: 16, maximum: 65535 });
    const { exports } = new WebAssembly.Instance(new WebAssembly.Module(readFileSync(file)), { env: { memory, abort: () => {} } });
    return { memory, calls: exports as BenchModule["calls"] };
  } finally {
    rmSync(folder, { recursive: true });
  }
}
