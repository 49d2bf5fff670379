// The kernel's raw exports for tests, on the build that the running vitest project names.
import { inject } from "vitest";

declare module "vitest" {
  interface ProvidedContext {
    kernelBuild: "plain" | "fused" | "debug";
  }
}

const files = {
  plain: new URL("../../bindings/kernel_bg.wasm", import.meta.url),
  fused: new URL("../../bindings/kernel_relaxed_bg.wasm", import.meta.url),
  debug: new URL("../../bindings/kernel_debug.wasm", import.meta.url),
};

/** Which build this project tests: plain SIMD, fused multiply-add, or the debug build with its asserts. */
export const kernelBuild = inject("kernelBuild");

export async function kernelBytes(build: "plain" | "fused" | "debug" = kernelBuild): Promise<ArrayBuffer> {
  const url = files[build];
  if (url.protocol !== "file:") return (await fetch(url)).arrayBuffer();
  const { readFile } = await import("node:fs/promises");
  const bytes = await readFile(url);
  return bytes.buffer.slice(bytes.byteOffset, bytes.byteOffset + bytes.byteLength) as ArrayBuffer;
}

type Raw = Record<string, (...args: number[]) => number>;
export interface RawKernel {
  raw: Raw;
  memory: WebAssembly.Memory;
}

/** A fresh instance with its own memory. An assert that fails in the debug build throws with its line. */
export async function rawKernel(build: "plain" | "fused" | "debug" = kernelBuild): Promise<RawKernel> {
  const memory = new WebAssembly.Memory({ initial: 16, maximum: 65535 });
  const abort = (message: number, file: number, line: number, column: number): never => {
    const text = (at: number) =>
      at ? String.fromCharCode(...new Uint16Array(memory.buffer, at, new Uint32Array(memory.buffer, at - 4, 1)[0]! >> 1)) : "";
    throw new Error(`kernel assert "${text(message)}" at ${text(file)}:${line}:${column}`);
  };
  const { instance } = await WebAssembly.instantiate(await kernelBytes(build), { env: { memory, abort } });
  return { raw: instance.exports as unknown as Raw, memory };
}
