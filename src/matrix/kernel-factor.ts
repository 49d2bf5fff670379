import type { Handle } from "../../bindings/handle.js";

/** A complete factor in kernel memory, as the long calls that read it see it. */
export interface KernelFactor {
  /** Unknowns. */
  readonly order: number;
  /** Its `address` throws after `dispose`: read it anew in every slice. */
  readonly handle: Handle;
  /** Address of the pattern's analysis; good as long as the handle is. */
  readonly symbolic: number;
}
