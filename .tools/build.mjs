// assembly/ → build/bindings/*.wasm by the compiler's own API, TypeScript → build/, the command as one file.
import { execFileSync } from "node:child_process";
import { copyFileSync, mkdirSync } from "node:fs";
import asc from "assemblyscript/asc";

const targets = process.argv.length > 2 ? process.argv.slice(2) : ["simd", "relaxed", "debug"];
mkdirSync("build/bindings", { recursive: true });
for (const target of targets) {
  const { error, stderr } = await asc.main(["--target", target]);
  if (error) {
    console.error(`${stderr}`);
    process.exit(1);
  }
}
// The loader finds the kernel beside itself: here for sources run in place (tests, bench), in build/ for the package.
const names = { simd: "kernel_bg", relaxed: "kernel_relaxed_bg", debug: "kernel_debug" };
for (const target of targets) copyFileSync(`build/bindings/${names[target]}.wasm`, `bindings/${names[target]}.wasm`);
execFileSync("npx", ["tsc", "-p", "."], { stdio: "inherit" });
// The published schema of the measurement log lies beside the code that reads it.
copyFileSync("src/log/log.schema.json", "build/src/log/log.schema.json");
