// wasm-pack-compatible loader (web target shape): default init(), initSync(), one instance per thread.
export type InitInput = string | URL | Request | Response | BufferSource | WebAssembly.Module;
export interface InitOptions {
  module_or_path?: InitInput | Promise<InitInput> | undefined;
  memory?: WebAssembly.Memory | undefined;
}
export type SyncInitInput = BufferSource | WebAssembly.Module;
export interface InitOutput {
  readonly memory: WebAssembly.Memory;
  readonly heapBase: () => number;
  readonly reserve: (end: number) => number;
  readonly dot: (x: number, y: number, n: number) => number;
  readonly isRelaxed: () => number;
}

let output: InitOutput | undefined;
let pending: Promise<InitOutput> | undefined;

// () -> v128 { f64x2.relaxed_madd }; validates only where relaxed SIMD is on by default.
const RELAXED_PROBE = /* @__PURE__ */ new Uint8Array([
  0, 97, 115, 109, 1, 0, 0, 0, 1, 5, 1, 96, 0, 1, 123, 3, 2, 1, 0, 10, 19, 1, 17, 0, 65, 0, 253, 15, 65, 0, 253, 15, 65, 0, 253, 15, 253,
  135, 2, 11,
]);

function makeImports(memory?: WebAssembly.Memory): WebAssembly.Imports {
  return {
    env: {
      memory: memory ?? new WebAssembly.Memory({ initial: 16, maximum: 65536 }),
      abort(_msg: number, _file: number, line: number, column: number): never {
        throw new Error(`kernel abort at ${line}:${column}`);
      },
    },
  };
}

const isOptions = (v: unknown): v is InitOptions => typeof v === "object" && v !== null && Object.getPrototypeOf(v) === Object.prototype;

export function initSync(input: { module: SyncInitInput; memory?: WebAssembly.Memory } | SyncInitInput): InitOutput {
  if (output) return output;
  const { module, memory } = (isOptions(input) ? input : { module: input }) as { module: SyncInitInput; memory?: WebAssembly.Memory };
  const m = module instanceof WebAssembly.Module ? module : new WebAssembly.Module(module);
  output = new WebAssembly.Instance(m, makeImports(memory)).exports as unknown as InitOutput;
  return output;
}

export default function init(input?: InitOptions | InitInput | Promise<InitInput>): Promise<InitOutput> {
  if (output) return Promise.resolve(output);
  pending ??= load(isOptions(input) ? input : { module_or_path: input })
    .then((o) => (output ??= o))
    .finally(() => {
      pending = undefined;
    });
  return pending;
}

export function relaxedSimd(): boolean {
  return WebAssembly.validate(RELAXED_PROBE);
}

async function load(options: InitOptions): Promise<InitOutput> {
  let source = await (options.module_or_path ??
    (relaxedSimd() ? new URL("./kernel_relaxed_bg.wasm", import.meta.url) : new URL("./kernel_bg.wasm", import.meta.url)));
  const imports = makeImports(options.memory);
  if (typeof source === "string" || source instanceof URL) source = await open(source);
  else if (typeof Request === "function" && source instanceof Request) source = await fetch(source);
  if (typeof Response === "function" && source instanceof Response) source = await fromResponse(source);
  const made = (await WebAssembly.instantiate(source as BufferSource, imports)) as unknown as
    | WebAssembly.Instance
    | WebAssembly.WebAssemblyInstantiatedSource;
  return ("instance" in made ? made.instance : made).exports as unknown as InitOutput;
}

/** Node cannot fetch file: URLs, so its file system is used, found without an import a bundler would trip on. */
function open(where: string | URL): Promise<Response | BufferSource> {
  const base = (globalThis as { location?: { href: string } }).location?.href ?? import.meta.url;
  const url = new URL(where, base);
  const fs =
    url.protocol === "file:"
      ? (globalThis as { process?: { getBuiltinModule?: (id: string) => typeof import("node:fs") } }).process?.getBuiltinModule?.("node:fs")
      : undefined;
  return fs ? (fs.promises.readFile(url) as Promise<BufferSource>) : fetch(url);
}

async function fromResponse(r: Response): Promise<BufferSource | WebAssembly.Module> {
  if (!r.ok) throw new Error(`kernel: HTTP ${r.status} for ${r.url}`);
  if (typeof WebAssembly.compileStreaming === "function" && /^application\/wasm\b/i.test(r.headers.get("content-type") ?? ""))
    return WebAssembly.compileStreaming(r);
  const bytes = await r.arrayBuffer();
  if (new DataView(bytes).getUint32(0) !== 0x0061736d)
    throw new Error(`kernel: ${r.url} is not WebAssembly (content-type ${r.headers.get("content-type")}); is the .wasm file deployed?`);
  return bytes;
}
