// From whatever a caller has (a URL, a response, bytes, a compiled module) to an instance of the kernel. Keeps no state.
import { KernelLoadError } from "./errors.js";
import type { KernelExports } from "./kernel.js";

/** Where the kernel may come from: as in the packages that wasm-pack makes. */
export type InitInput = string | URL | Request | Response | BufferSource | WebAssembly.Module;
export type SyncInitInput = BufferSource | WebAssembly.Module;

/** WebAssembly's own limit less one page, so that an end address fits 32 bits: the same as in assembly/memory/heap.ts. */
const LARGEST_MEMORY_PAGES = 65535;
const FIRST_PAGES = 16;
const MAGIC = 0x0061736d;
const DEPLOY = "Is the .wasm file deployed beside the script, and does the server answer with the file itself?";

function instantiateModule(module: WebAssembly.Module, memory: WebAssembly.Memory | undefined, source: string): KernelExports {
  let exports: Partial<KernelExports>;
  try {
    exports = new WebAssembly.Instance(module, {
      env: {
        memory: memory ?? new WebAssembly.Memory({ initial: FIRST_PAGES, maximum: LARGEST_MEMORY_PAGES }),
        abort(_message: number, _file: number, line: number, column: number): never {
          throw new Error(`kernel assert at ${line}:${column}`); // the debug build alone has asserts
        },
      },
    }).exports as Partial<KernelExports>;
  } catch (cause) {
    throw new KernelLoadError(source, `cannot be linked (${cause})`, "Take the .wasm file of this package's version.", cause);
  }
  if (!exports.allocate || !exports.analysisBegin || !exports.memory)
    throw new KernelLoadError(source, "is WebAssembly, but not this package's kernel", "Take the .wasm file of this package's version.");
  return exports as KernelExports;
}

/** Compiles on the calling thread: pages allow that for small modules or in a worker only. */
export function loadKernelSync(module: SyncInitInput, memory?: WebAssembly.Memory): KernelExports {
  const source = "given to initSync";
  if (module instanceof WebAssembly.Module) return instantiateModule(module, memory, source);
  checkMagic(module, source);
  return instantiateModule(new WebAssembly.Module(module), memory, source);
}

export async function loadKernel(input: InitInput | Promise<InitInput>, memory?: WebAssembly.Memory): Promise<KernelExports> {
  const given = await input;
  const source = nameOf(given);
  const opened = await open(given, source);
  try {
    const module = opened instanceof WebAssembly.Module ? opened : await WebAssembly.compile(opened);
    return instantiateModule(module, memory, source);
  } catch (cause) {
    if (cause instanceof KernelLoadError) throw cause;
    throw new KernelLoadError(source, `cannot be compiled (${cause})`, "WebAssembly with fixed-width SIMD is needed.", cause);
  }
}

const isResponse = (input: unknown): input is Response => typeof Response === "function" && input instanceof Response;
const isRequest = (input: unknown): input is Request => typeof Request === "function" && input instanceof Request;

function nameOf(input: InitInput): string {
  if (typeof input === "string" || input instanceof URL) return String(input);
  return isResponse(input) || isRequest(input) ? input.url || "in the given response" : "given to init";
}

async function open(input: InitInput, source: string): Promise<BufferSource | WebAssembly.Module> {
  if (input instanceof WebAssembly.Module) return input;
  if (isResponse(input)) return fromResponse(input, source);
  if (typeof input === "string" || input instanceof URL || isRequest(input)) {
    const found = isRequest(input) ? undefined : readFile(input);
    let answer: BufferSource | Response;
    try {
      answer = await (found ?? fetch(input));
    } catch (cause) {
      throw new KernelLoadError(source, `cannot be read (${cause})`, DEPLOY, cause);
    }
    if (isResponse(answer)) return fromResponse(answer, source);
    checkMagic(answer, source);
    return answer;
  }
  checkMagic(input, source);
  return input;
}

/** Node cannot fetch `file:` URLs. Its file system is looked up without an import, which bundlers for pages would trip over. */
function readFile(where: string | URL): Promise<BufferSource> | undefined {
  const page = (globalThis as { location?: { href: string } }).location?.href;
  let url: URL;
  try {
    url = new URL(where, page ?? import.meta.url);
  } catch {
    return undefined; // fetch says what is wrong with it
  }
  if (url.protocol !== "file:") return undefined;
  const builtin = (globalThis as { process?: { getBuiltinModule?: (id: string) => typeof import("node:fs") } }).process?.getBuiltinModule;
  return builtin?.("node:fs").promises.readFile(url) as Promise<BufferSource> | undefined;
}

async function fromResponse(response: Response, source: string): Promise<BufferSource | WebAssembly.Module> {
  if (!response.ok) throw new KernelLoadError(source, `was answered with HTTP status ${response.status}`, DEPLOY);
  const type = response.headers.get("content-type") ?? "no content type";
  if (/^application\/wasm\b/i.test(type) && typeof WebAssembly.compileStreaming === "function") {
    const copy = response.clone();
    try {
      return await WebAssembly.compileStreaming(response);
    } catch {
      // Not WebAssembly after all, or cut short: the check below says which.
      const bytes = await copy.arrayBuffer();
      checkMagic(bytes, source, type);
      return bytes;
    }
  }
  const bytes = await response.arrayBuffer();
  checkMagic(bytes, source, type);
  return bytes;
}

function checkMagic(bytes: unknown, source: string, type = "bytes"): void {
  const view = ArrayBuffer.isView(bytes)
    ? new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
    : bytes instanceof ArrayBuffer || (typeof SharedArrayBuffer === "function" && bytes instanceof SharedArrayBuffer)
      ? new DataView(bytes)
      : undefined;
  if (!view)
    throw new KernelLoadError(
      source,
      `is a value of type ${bytes === null ? "null" : typeof bytes}`,
      "Give a URL, a Request, a Response, the bytes, a compiled WebAssembly.Module, or a promise of one of these.",
    );
  if (view.byteLength >= 4 && view.getUint32(0) === MAGIC) return;
  const page = view.byteLength > 0 && view.getUint8(0) === "<".charCodeAt(0);
  throw new KernelLoadError(source, `is ${page ? "a page" : "something else"} (${type}), not WebAssembly`, DEPLOY);
}
