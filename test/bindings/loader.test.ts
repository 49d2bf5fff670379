import { expect, test } from "vitest";
import { KernelLoadError, NotInitializedError } from "../../bindings/errors.js";
import { kernelBytes } from "../support/kernel.js";

const bytes = await kernelBytes();
let copies = 0;

/** The loader as a thread that has just imported it sees it. */
function freshLoader(): Promise<typeof import("../../bindings/loader.js")> {
  copies += 1;
  return import(/* @vite-ignore */ `${new URL("../../bindings/loader.ts", import.meta.url).href}?fresh=${copies}`);
}

test("before init every call throws NotInitializedError", async () => {
  const { kernel } = await freshLoader();
  expect(kernel).toThrowError(NotInitializedError);
  expect(kernel).toThrowError(/await init\(\)/);
});

test("init without input finds the file beside the module; build: plain pins the one without fused multiply-add", async () => {
  const automatic = await freshLoader();
  const loaded = await automatic.default();
  expect(Boolean(loaded.isFused())).toBe(automatic.fusedIsAvailable());
  expect(automatic.kernel()).toBe(loaded);
  const plain = await freshLoader();
  expect((await plain.default({ build: "plain" })).isFused()).toBe(0);
});

test("calls at once, and later ones, get one instance", async () => {
  const { default: init, initSync, kernel } = await freshLoader();
  const [first, second] = await Promise.all([init(bytes), init({ module_or_path: bytes })]);
  expect(second).toBe(first);
  expect(await init()).toBe(first);
  expect(initSync({ module: bytes })).toBe(first);
  expect(kernel()).toBe(first);
});

test("initSync takes bytes or a module, bare or in options", async () => {
  for (const input of [bytes, { module: bytes }, { module: new WebAssembly.Module(bytes) }, new WebAssembly.Module(bytes)]) {
    const { initSync, kernel } = await freshLoader();
    expect(initSync(input)).toBe(kernel());
  }
});

test("a failed try is forgotten: the next one loads", async () => {
  const { default: init, kernel } = await freshLoader();
  await expect(init(new Response("gone", { status: 410 }))).rejects.toThrowError(KernelLoadError);
  expect(kernel).toThrowError(NotInitializedError);
  expect(await init({ module_or_path: Promise.resolve(bytes) })).toBe(kernel());
});

test("initSync while init is under way: both give the instance that came first", async () => {
  const { default: init, initSync } = await freshLoader();
  const pending = init(bytes);
  const first = initSync(bytes);
  expect(await pending).toBe(first);
});

test("the memory may be the caller's own", async () => {
  const { default: init } = await freshLoader();
  const memory = new WebAssembly.Memory({ initial: 16, maximum: 65535 });
  expect((await init({ module_or_path: bytes, memory })).memory).toBe(memory);
});
