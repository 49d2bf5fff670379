// The base of every error, and what can go wrong below the matrices: loading the kernel, its memory, its objects' lifetimes.

/** Every error of this package: `code` never changes, `details` is a plain object that survives a trip to another thread, and the
 *  message says what is wrong, which value, where, and how to mend it. */
export class SigmatideError extends Error {
  constructor(
    readonly code: string,
    message: string,
    readonly details: Readonly<Record<string, unknown>> = {},
    options?: ErrorOptions,
  ) {
    super(message, options);
    this.name = new.target.name;
  }
}

/** The kernel could not be fetched, compiled or linked. `details.source` names the file where one is known. */
export class KernelLoadError extends SigmatideError {
  constructor(source: string, why: string, mend: string, cause?: unknown) {
    super("KERNEL_LOAD", `The kernel ${source} ${why}. ${mend}`, { source }, { cause });
  }
}

export class NotInitializedError extends SigmatideError {
  constructor() {
    super("NOT_INITIALIZED", "The kernel is not loaded yet: await init(), or call initSync({ module }), once before any other call.");
  }
}

export class DisposedError extends SigmatideError {
  constructor(what: string) {
    super("DISPOSED", `This ${what} was disposed and holds no memory any more: make a new one, or dispose it later.`, { what });
  }
}

/** More memory is needed than the limit leaves. Nothing was changed. */
export class MemoryLimitError extends SigmatideError {
  constructor(what: string, bytesNeeded: number, bytesAvailable: number) {
    super(
      "MEMORY_LIMIT",
      `${what} needs ${bytesNeeded} bytes of kernel memory and ${bytesAvailable} are left: dispose what is no longer used, ` +
        "raise the limit by setMemoryLimit (WebAssembly holds at most 4 GiB), or take a smaller problem.",
      { what, bytesNeeded, bytesAvailable },
    );
  }
}
