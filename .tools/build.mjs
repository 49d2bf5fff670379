// assembly/ → build/bindings/*.wasm by the compiler's own API, TypeScript → build/, the command as one file.
import { execFileSync } from "node:child_process";
import { chmodSync, copyFileSync, mkdirSync, readFileSync, writeFileSync } from "node:fs";
import asc from "assemblyscript/asc";
import { build } from "vite";

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

// The kernel as text, decoded when it is asked for: importing does no work.
const text = readFileSync("build/bindings/kernel_bg.wasm").toString("base64");
writeFileSync("build/bindings/inline.js", `export default () => Uint8Array.from(atob("${text}"), (c) => c.charCodeAt(0));\n`);
writeFileSync(
  "build/bindings/inline.d.ts",
  `/** The kernel's bytes (the plain build), for where no second file can be served: initSync({ module: kernelBytes() }).
 *  It helps neither edge workers, which take compiled modules alone, nor a policy that forbids 'wasm-unsafe-eval'. */
export default function kernelBytes(): Uint8Array<ArrayBuffer>;
`,
);
writeFileSync("build/bindings/kernel_bg.wasm.d.ts", "declare const module: WebAssembly.Module;\nexport default module;\n");

// The command with the packages it uses, so that the installed package has no dependency.
await build({
  configFile: false,
  logLevel: "warn",
  build: {
    ssr: "src/cli/command.ts",
    outDir: "build",
    emptyOutDir: false,
    target: "node20",
    rolldownOptions: { output: { entryFileNames: "command.mjs" } },
  },
  ssr: { noExternal: true },
});
chmodSync("build/command.mjs", 0o755);
