// Lifetimes of objects that own kernel memory: `dispose` frees at once; a finalizer is only a net for those who forget.
import { DisposedError } from "./errors.js";

const net = typeof FinalizationRegistry === "function" ? new FinalizationRegistry<Handle>((handle) => handle.dispose()) : undefined;

/** The address of one kernel object and how to free it. */
export class Handle {
  readonly #what: string;
  #address: number;
  #free: (() => void) | undefined;

  /** @param owner the object whose end frees the memory; `free` must not refer to it. */
  constructor(owner: object, what: string, address: number, free: () => void) {
    this.#what = what;
    this.#address = address;
    this.#free = free;
    net?.register(owner, this, this);
  }

  /** @throws {DisposedError} after `dispose`. */
  get address(): number {
    if (!this.#free) throw new DisposedError(this.#what);
    return this.#address;
  }

  /** Frees; the second time does nothing. */
  dispose(): void {
    const free = this.#free;
    this.#free = undefined;
    this.#address = 0;
    net?.unregister(this);
    free?.();
  }
}
