import { describe, expect, test } from "vitest";
import { KernelLoadError } from "../../bindings/errors.js";
import { type InitInput, loadKernel, loadKernelSync } from "../../bindings/load.js";
import { errorOf } from "../support/facade.js";
import { kernelBytes } from "../support/kernel.js";

const bytes = await kernelBytes();
const url = new URL("../../bindings/kernel_bg.wasm", import.meta.url);
const answer = (body: BodyInit, type: string, status = 200): Response => new Response(body, { status, headers: { "content-type": type } });

const sources: Record<string, () => InitInput | Promise<InitInput>> = {
  "an ArrayBuffer": () => bytes,
  "a view into a larger buffer": () => {
    const larger = new Uint8Array(bytes.byteLength + 7);
    larger.set(new Uint8Array(bytes), 3);
    return larger.subarray(3, 3 + bytes.byteLength);
  },
  "a compiled module": () => new WebAssembly.Module(bytes),
  "a promise of a compiled module": () => WebAssembly.compile(bytes),
  "a promise of a response": async () => answer(bytes, "application/wasm"),
  "a response as application/wasm with a parameter": () => answer(bytes, "application/wasm; charset=binary"),
  "a response as text/plain": () => answer(bytes, "text/plain"),
  "a response as application/octet-stream": () => answer(bytes, "application/octet-stream"),
  "a URL": () => url,
  "a URL as a string": () => url.href,
};
if (url.protocol !== "file:") sources["a Request"] = () => new Request(url);

describe("the kernel loads from", () => {
  for (const [name, source] of Object.entries(sources)) {
    test(name, async () => {
      const kernel = await loadKernel(source());
      const address = kernel.allocate(100);
      expect(address).toBeGreaterThan(0);
      expect(kernel.memory.buffer.byteLength).toBeGreaterThan(address);
    });
  }
  test("bytes and a module without waiting, and a memory of the caller's", () => {
    const memory = new WebAssembly.Memory({ initial: 16, maximum: 65535 });
    expect(loadKernelSync(new WebAssembly.Module(bytes), memory).memory).toBe(memory);
    expect(loadKernelSync(new Uint8Array(bytes)).allocate(8)).toBeGreaterThan(0);
  });
});

const page = "<!doctype html><title>Not found, here is the start page</title>";
const emptyModule = Uint8Array.of(0, 97, 115, 109, 1, 0, 0, 0);
const mistakes: Record<string, { source: () => unknown; says: RegExp }> = {
  "a page instead of the file": { source: () => answer(page, "text/html"), says: /is a page \(text\/html/ },
  "a page that claims to be WebAssembly": { source: () => answer(page, "application/wasm"), says: /is a page \(application\/wasm\)/ },
  "an answer 404": { source: () => answer(page, "text/html", 404), says: /HTTP status 404/ },
  "a file that is not there": { source: () => new URL("./no-such-file.wasm?raw-bytes", import.meta.url), says: /no-such-file/ },
  "bytes cut short": { source: () => bytes.slice(0, 1000), says: /cannot be compiled/ },
  "a response cut short": { source: () => answer(bytes.slice(0, 1000), "application/wasm"), says: /cannot be compiled/ },
  "no bytes": { source: () => new Uint8Array(0), says: /something else \(bytes\), not WebAssembly/ },
  "another module": { source: () => emptyModule, says: /not this package's kernel/ },
  "a memory too large for it": {
    source: () => loadKernel(bytes, new WebAssembly.Memory({ initial: 16, maximum: 65536 })),
    says: /cannot be linked/,
  },
  "a number": { source: () => 42, says: /a value of type number/ },
  null: { source: () => null, says: /a value of type null/ },
  "a promise that fails": { source: () => Promise.reject(new KernelLoadError("from afar", "is late", "Wait.")), says: /from afar is late/ },
};

describe("a KernelLoadError says what is wrong and how to mend it:", () => {
  for (const [name, { source, says }] of Object.entries(mistakes)) {
    test(name, async () => {
      const error = await errorOf(() => loadKernel(source() as InitInput));
      expect(error).toBeInstanceOf(KernelLoadError);
      expect((error as KernelLoadError).code).toBe("KERNEL_LOAD");
      expect((error as KernelLoadError).message).toMatch(says);
    });
  }
  test("initSync given a page", () => {
    expect(() => loadKernelSync(new TextEncoder().encode(page))).toThrowError(/is a page/);
  });
});
