// The one kernel instance of a thread, loaded in the shape of wasm-pack's packages: a default `init`, and `initSync`.
import { NotInitializedError } from "./errors.js";
import type { KernelExports } from "./kernel.js";
import { type InitInput, loadKernel, loadKernelSync, type SyncInitInput } from "./load.js";

export type { InitInput, SyncInitInput } from "./load.js";

/** The kernel's raw exports; the facade's functions are the way to use them. */
export type InitOutput = KernelExports;

export interface InitOptions {
  /** Where the kernel is; by default the file beside this module. */
  module_or_path?: InitInput | Promise<InitInput> | undefined;
  /** The memory to use: at most 65535 pages. By default a fresh one. */
  memory?: WebAssembly.Memory | undefined;
  /** `"automatic"` takes the build with fused multiply-add where the engine has relaxed SIMD; `"plain"` pins the other one, whose bits
   *  are the same on every machine. Without effect when `module_or_path` is given. */
  build?: "automatic" | "plain" | undefined;
}

let current: KernelExports | undefined;
let pending: Promise<KernelExports> | undefined;

/** () → v128 { f64x2.relaxed_madd }: valid where relaxed SIMD is on. */
const RELAXED_PROBE: readonly number[] = [
  0, 97, 115, 109, 1, 0, 0, 0, 1, 5, 1, 96, 0, 1, 123, 3, 2, 1, 0, 10, 19, 1, 17, 0, 65, 0, 253, 15, 65, 0, 253, 15, 65, 0, 253, 15, 253,
  135, 2, 11,
];

/** Whether this engine runs the build with fused multiply-add. */
export function fusedIsAvailable(): boolean {
  return WebAssembly.validate(new Uint8Array(RELAXED_PROBE));
}

const isOptions = (input: unknown): input is Record<string, unknown> => {
  const prototype = typeof input === "object" && input !== null ? Object.getPrototypeOf(input) : undefined;
  return prototype === Object.prototype || prototype === null;
};

/**
 * Loads the kernel, once a thread. Safe to call twice, or at once from two places: all get the same instance, that of the first call.
 * A try that fails is forgotten, so it can be repeated.
 * @param input nothing (the file beside this module), a URL, Request, Response, bytes, compiled module, a promise of one of these, or
 *   options.
 * @throws {KernelLoadError} not found, not WebAssembly (a page instead of the file, say), or not this kernel.
 */
export default function init(input?: InitOptions | InitInput | Promise<InitInput>): Promise<InitOutput> {
  if (current) return Promise.resolve(current);
  const { module_or_path, memory, build } = (isOptions(input) ? input : { module_or_path: input }) as InitOptions;
  pending ??= loadKernel(module_or_path ?? fileOf(build), memory)
    .then((loaded) => {
      current ??= loaded;
      return current;
    })
    .finally(() => {
      pending = undefined;
    });
  return pending;
}

// Bundlers look for just this form of `new URL`, one a file.
function fileOf(build: InitOptions["build"]): URL {
  return build !== "plain" && fusedIsAvailable()
    ? new URL("./kernel_relaxed_bg.wasm", import.meta.url)
    : new URL("./kernel_bg.wasm", import.meta.url);
}

/**
 * Loads the kernel from bytes or a compiled module without waiting, once a thread.
 * @throws {KernelLoadError} as `init`.
 */
export function initSync(input: { module: SyncInitInput; memory?: WebAssembly.Memory } | SyncInitInput): InitOutput {
  if (current) return current;
  const { module, memory } = (isOptions(input) ? input : { module: input }) as { module: SyncInitInput; memory?: WebAssembly.Memory };
  current = loadKernelSync(module, memory);
  return current;
}

/** The instance of this thread. @throws {NotInitializedError} before `init` has ended. */
export function kernel(): KernelExports {
  if (!current) throw new NotInitializedError();
  return current;
}
