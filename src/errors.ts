/** Every error of the package: a stable `code`, a message (what, which value, where, how to mend) and the facts as plain data. */
export class SigmatideError extends Error {
  readonly code: string;
  readonly details: Readonly<Record<string, unknown>>;
  constructor(code: string, message: string, details: Readonly<Record<string, unknown>> = {}) {
    super(message);
    this.name = new.target.name;
    this.code = code;
    this.details = details;
  }
}
