// How a caller chooses the elimination order, checked and in the kernel's codes.
import { LengthError, NotAPermutationError } from "../errors.js";
import { indicesOf, requireKnownOptions, requireLength, requireWord } from "../support/checks.js";

/** The kernel's codes are the places in this list (assembly/ordering/ordering.ts). */
const orderings = ["automatic", "minimum-degree", "nested-dissection", "natural", "given"] as const;

/** How the order of elimination was found. */
export type OrderingName = (typeof orderings)[number];

export interface FactorizeOptions {
  /** The order of elimination. `"automatic"`, the default, predicts which order makes factor and inverse cheapest; an array eliminates
   *  unknown `ordering[k]` k-th. `"natural"` and an array are kept up to exchanges that change no sum and no entry of L (a postorder of
   *  the elimination tree); with `blockSizes`, a state goes where its first unknown does. */
  ordering?: Exclude<OrderingName, "given"> | ArrayLike<number> | undefined;
  /** Sizes of the states: consecutive unknowns that share one pattern, adding up to the order. By default they are found. */
  blockSizes?: ArrayLike<number> | undefined;
}

export const factorizeOptionNames: readonly string[] = ["ordering", "blockSizes"];

export interface CheckedOptions {
  code: number;
  givenOrder?: Int32Array | undefined;
  /** Undefined: the kernel finds the states. */
  blockSizes: Int32Array | undefined;
}

export const orderingName = (code: number): OrderingName => orderings[code]!;

export function checkOptions(order: number, options: FactorizeOptions, of: string, names: readonly string[]): CheckedOptions {
  requireKnownOptions(of, options, names);
  const { ordering = "automatic" } = options;
  const blockSizes = options.blockSizes && indicesOf("blockSizes", options.blockSizes, 1, order);
  if (blockSizes) {
    const sum = blockSizes.reduce((total, size) => total + size, 0);
    if (sum !== order) throw new LengthError("the sum of blockSizes", sum, order);
  }
  if (typeof ordering === "string") {
    requireWord("ordering", ordering, orderings.slice(0, -1));
    const keepsOrder = ordering === "natural";
    return { code: orderings.indexOf(ordering), blockSizes: blockSizes ?? (keepsOrder ? singles(order) : undefined) };
  }
  requireLength("ordering", ordering.length, order);
  const givenOrder = indicesOf("ordering", ordering, 0, order - 1);
  const seenAt = new Int32Array(order).fill(-1);
  for (const [k, unknown] of givenOrder.entries()) {
    if (seenAt[unknown] !== -1) throw new NotAPermutationError("ordering", unknown, seenAt[unknown]!, k);
    seenAt[unknown] = k;
  }
  return { code: orderings.indexOf("given"), givenOrder, blockSizes: blockSizes ?? singles(order) };
}

/** Every unknown a state of its own: finding larger states would move unknowns within the order that the caller chose. */
const singles = (order: number): Int32Array => new Int32Array(order).fill(1);
