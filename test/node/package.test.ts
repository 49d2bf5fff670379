// The package as its users get it: packed, installed in an empty folder, imported, bundled, weighed.
import { execFileSync, spawnSync } from "node:child_process";
import { existsSync, mkdirSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { gzipSync } from "node:zlib";
import { build as esbuild } from "esbuild";
import { publint } from "publint";
import { build as viteBuild } from "vite";
import { afterAll, beforeAll, expect, test } from "vitest";

const root = fileURLToPath(new URL("../..", import.meta.url));
let folder: string;
let installed: string;

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), "sigmatide-package-"));
  const [packed] = JSON.parse(
    execFileSync("npm", ["pack", "--json", "--ignore-scripts", "--pack-destination", folder], { cwd: root, encoding: "utf8" }),
  );
  writeFileSync(join(folder, "package.json"), JSON.stringify({ name: "user", private: true, type: "module" }));
  execFileSync("npm", ["install", "--offline", "--no-audit", "--no-fund", join(folder, packed.filename)], { cwd: folder });
  installed = join(folder, "node_modules", "sigmatide");
}, 120_000);
afterAll(() => rmSync(folder, { recursive: true }));

/** What a user's script does: the variances of tridiagonal [−1 2 −1] of order 3 are 3/4, 1, 3/4 (Rutherford 1947). */
const use = `
  const matrix = SymmetricMatrix.fromTriplets(3, [0, 1, 1, 2, 2], [0, 0, 1, 1, 2], [2, -1, 2, -1, 2]);
  const factor = factorize(matrix);
  const variances = factor.inverseDiagonal();
  factor.dispose();
`;
const variances = (line: string): number[] => {
  const numbers: number[] = JSON.parse(line);
  return numbers.map((value) => Math.round(value * 1e12) / 1e12);
};
const runScript = (name: string, text: string): string => {
  writeFileSync(join(folder, name), text);
  const { status, stdout, stderr } = spawnSync(process.execPath, [name], { cwd: folder, encoding: "utf8" });
  expect({ status, stderr }).toEqual({ status: 0, stderr: "" });
  return stdout;
};

test("it installs without any other package, holds what it should and nothing else", () => {
  expect(readdirSync(join(folder, "node_modules")).filter((name) => !name.startsWith("."))).toEqual(["sigmatide"]);
  const facts = JSON.parse(readFileSync(join(installed, "package.json"), "utf8"));
  expect(facts.dependencies ?? {}).toEqual({});
  expect(facts.scripts.install ?? facts.scripts.postinstall ?? facts.scripts.prepare).toBeUndefined();
  for (const target of Object.values(facts.exports).flatMap((entry) =>
    typeof entry === "string" ? [entry] : Object.values(entry as object),
  ))
    expect(existsSync(join(installed, target)), target).toBe(true);
  const names = readdirSync(installed, { recursive: true }).map(String);
  expect(names.filter((name) => /debug|\.wat$|(^|\/)(test|bench|assembly)(\/|$)/.test(name))).toEqual([]);
  expect(readdirSync(installed).sort()).toEqual(["LICENSE", "README.md", "build", "package.json"]);
});

test("publint finds nothing to say", async () => {
  const { messages } = await publint({ pkgDir: installed, pack: false, level: "suggestion", strict: true });
  expect(messages).toEqual([]);
});

test("Node imports it as an ES module, and a worker thread takes the compiled kernel through workerData", () => {
  const main = `import init, { factorize, SymmetricMatrix } from "sigmatide";
    await init();
    ${use}
    console.log(JSON.stringify([...variances]));`;
  expect(variances(runScript("main.mjs", main))).toEqual([0.75, 1, 0.75]);
  writeFileSync(
    join(folder, "worker.mjs"),
    `import { parentPort, workerData } from "node:worker_threads";
    import { factorize, initSync, SymmetricMatrix } from "sigmatide";
    initSync({ module: workerData });
    ${use}
    parentPort.postMessage([...variances]);`,
  );
  const parent = `import { readFileSync } from "node:fs";
    import { Worker } from "node:worker_threads";
    const file = new URL(import.meta.resolve("sigmatide/kernel_bg.wasm"));
    const worker = new Worker(new URL("./worker.mjs", import.meta.url), { workerData: new WebAssembly.Module(readFileSync(file)) });
    worker.once("message", (answer) => console.log(JSON.stringify(answer)));`;
  expect(variances(runScript("parent.mjs", parent))).toEqual([0.75, 1, 0.75]);
});

test("the inlined kernel needs no second file, and importing either entry does no work", () => {
  const script = `import kernelBytes from "sigmatide/inline";
    import { factorize, initSync, SymmetricMatrix } from "sigmatide";
    initSync({ module: kernelBytes() });
    ${use}
    console.log(JSON.stringify([...variances]));`;
  expect(variances(runScript("inline.mjs", script))).toEqual([0.75, 1, 0.75]);
  const idle = `for (const name of ["Instance", "Module", "Memory"]) WebAssembly[name] = class { constructor() { throw new Error(name); } };
    globalThis.fetch = globalThis.atob = () => { throw new Error("work at import"); };
    await import("sigmatide");
    await import("sigmatide/inline");`;
  expect(runScript("idle.mjs", idle)).toBe("");
});

test("the installed command runs", () => {
  const { status, stdout } = spawnSync(join(folder, "node_modules", ".bin", "sigmatide"), ["demo"], { encoding: "utf8" });
  expect(status).toBe(0);
  expect(stdout).toMatch(/Kestermouth/);
});

/** Runs a bundle's main.js; its kernel is found by the URL that the bundler wrote. */
function runBundle(site: string): number[] {
  const script = `globalThis.report = (variances) => console.log(JSON.stringify([...variances]));
    await import(${JSON.stringify(join(site, "main.js"))});`;
  return variances(runScript("bundle.mjs", script));
}

test("Vite bundles it with both kernels beside, and the bundle runs", async () => {
  const site = join(folder, "vite");
  mkdirSync(site);
  const page = `import init, { factorize, SymmetricMatrix } from "sigmatide";
    await init();
    ${use}
    globalThis.report(variances);`;
  writeFileSync(join(site, "main.js"), page);
  await viteBuild({
    root: site,
    base: "./",
    configFile: false,
    logLevel: "error",
    build: { target: "es2022", rolldownOptions: { input: join(site, "main.js"), output: { entryFileNames: "main.js" } } },
  });
  const names = readdirSync(join(site, "dist"), { recursive: true }).map(String);
  expect(names.filter((name) => name.endsWith(".wasm"))).toHaveLength(2);
  expect(runBundle(join(site, "dist"))).toEqual([0.75, 1, 0.75]);
});

test("esbuild bundles it with the kernel imported as a file, and the bundle runs", async () => {
  const site = join(folder, "esbuild");
  const page = `import init, { factorize, SymmetricMatrix } from "sigmatide";
    import kernelFile from "sigmatide/kernel_bg.wasm";
    await init(new URL(kernelFile, import.meta.url));
    ${use}
    globalThis.report(variances);`;
  const entry = join(folder, "esbuild-main.js");
  writeFileSync(entry, page);
  await esbuild({
    entryPoints: { main: entry },
    bundle: true,
    format: "esm",
    target: "es2022",
    outdir: site,
    loader: { ".wasm": "file" },
    logLevel: "error",
  });
  expect(readdirSync(site).filter((name) => name.endsWith(".wasm"))).toHaveLength(1);
  expect(runBundle(site)).toEqual([0.75, 1, 0.75]);
});

test("the README's examples run, one after another, and print what they say", () => {
  const examples = [...readFileSync(join(installed, "README.md"), "utf8").matchAll(/```js\n([\s\S]*?)```/g)].map(([, code]) => code!);
  expect(examples.length).toBeGreaterThan(1);
  const printed = [...examples.join("").matchAll(/\/\/ → (.*)/g)].map(([, line]) => line!);
  expect(runScript("example.mjs", examples.join("")).trim().split("\n")).toEqual(printed);
});

/** gzip bytes of what a bundler ships for a script. */
async function bundledSize(script: string): Promise<number> {
  const entry = join(folder, "size.js");
  writeFileSync(entry, script);
  const { outputFiles } = await esbuild({
    entryPoints: [entry],
    bundle: true,
    minify: true,
    format: "esm",
    target: "es2022",
    write: false,
  });
  return gzipSync(outputFiles[0]!.contents, { level: 9 }).length;
}

test("sizes stay within their budgets: kernel 60 kB gzip a build, facade of matrices and factor 12 kB gzip", async () => {
  for (const name of ["kernel_bg.wasm", "kernel_relaxed_bg.wasm"])
    expect(gzipSync(readFileSync(join(installed, "build", "bindings", name)), { level: 9 }).length).toBeLessThanOrEqual(60_000);
  const facade = `import init, { factorize, factorizeAsync, initSync, SymmetricMatrix } from "sigmatide";
    console.log(init, initSync, factorize, factorizeAsync, SymmetricMatrix);`;
  expect(await bundledSize(facade)).toBeLessThanOrEqual(12_000);
  const justErrors = await bundledSize(`import { SigmatideError } from "sigmatide"; console.log(SigmatideError);`);
  expect(justErrors).toBeLessThan(2_000); // the rest falls away when it is not used
});
