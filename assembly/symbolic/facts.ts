/** What a caller asks of a Symbolic: sizes, costs and the memory that the next step would take, before it is taken. */
import { inverseScratch } from "../dense/inverse-of-product";
import { Symbolic } from "./symbolic";

/** Address of order i32[n]: order[c] = caller's unknown eliminated c-th. */
export function symbolicOrder(s: Symbolic): usize { return s.order; }
/** Entries of L. */
export function symbolicNonzeros(s: Symbolic): f64 { return s.nonzeros; }
/** Flops of the factorization: Σ over columns of L of (entries)². */
export function symbolicFlops(s: Symbolic): f64 { return s.flops; }
export function symbolicSupernodes(s: Symbolic): i32 { return s.supernodes; }
/** How the order was found: one of the kinds of ordering/ordering.ts. */
export function symbolicOrdering(s: Symbolic): i32 { return s.ordering; }
/** Bytes of the tables. */
export function symbolicBytes(s: Symbolic): f64 { return s.bytes; }
/** Bytes that factorCreate takes: the panels of L and the update stacks. */
export function factorBytes(s: Symbolic): f64 { return 8 * (s.panelEntries + s.updateEntries + <f64>s.widest); }
/** Bytes that inverseBegin takes at its peak, with or without kept panels. */
export function inverseBytes(s: Symbolic, keepPanels: bool): f64 {
  return 8 * (s.frontEntries + s.largestBelow + <f64>s.n + (keepPanels ? s.panelEntries : 0)) + <f64>inverseScratch(s.widest);
}
