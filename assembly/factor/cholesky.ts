/** Supernodal Cholesky A[order, order] = L Lᵀ by fronts: each supernode gathers A's values and its children's updates, factors its
 *  panel, and leaves the update of what is above it on a stack. All arithmetic but the gathering runs in the dense kernels.
 *  Sources: Duff, Reid, "The multifrontal solution of indefinite sparse symmetric linear equations", ACM TOMS 9 (1983);
 *  Liu, "The multifrontal method for sparse matrix solution: theory and practice", SIAM Review 34 (1992). */
import { allocateArray, release } from "../memory/heap";
import { f64At, i32At, setF64, u32At } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { multiply } from "../dense/multiply";
import { rankUpdateLower } from "../dense/rank-update";
import { factorPanel } from "../dense/factor-panel";
import { NEGATE, SUBTRACT } from "../dense/mode";
import { panelFlops } from "../symbolic/structure";
import { scatterValues } from "../symbolic/positions";
import { Symbolic } from "../symbolic/symbolic";
import { addUpdate } from "./assemble";

/** A pivot at most this share of its original diagonal entry is rounding noise: the unknown is not determined in f64. */
export const PIVOT_FLOOR: f64 = 8 * f64.EPSILON;
/** Columns of a panel factored, and of an update formed, in one piece of a sliced call. */
const SLICE = 96;
/** Flops a nanosecond of large and of small panels, and nanoseconds a supernode, for the budget. */
const FLOPS_PER_UNIT = 16.0, UNITS_PER_SUPERNODE = 100.0;

// What is done next to the supernode at hand.
const GATHER = 0, PANEL = 1, UPDATE = 2;

@unmanaged
export class Factor {
  symbolic: Symbolic;
  /** f64[panelEntries]: the panels of L. */
  panels: usize;
  /** f64[updateEntries]: the update stacks. */
  updates: usize;
  /** f64[widest]: pivot floors of the panel at hand. */
  floors: usize;
  /** A's values, f64[nnzA] in the caller's storage order; read while the factorization runs. */
  values: usize;
  /** Supernode at hand, what is next for it, and from which column. */
  at: i32;
  phase: i32;
  from: i32;
  /** The pivot that stopped the factorization. */
  pivot: f64;
  /** panelFlops of the finished panels. */
  done: f64;
}

/** Room for the factor of matrices with this pattern, or null when memory runs out. Nothing is factored yet. */
export function factorCreate(symbolic: Symbolic): Factor | null {
  const address = allocateArray(1, 7);
  if (!address) return null;
  assert(offsetof<Factor>() <= 128);
  memory.fill(address, 0, 128);
  const f = changetype<Factor>(address);
  f.symbolic = symbolic;
  f.panels = allocateArray(symbolic.panelEntries, 3);
  f.updates = allocateArray(symbolic.updateEntries, 3);
  f.floors = allocateArray(<f64>symbolic.widest, 3);
  if (!f.panels || !f.updates || !f.floors) { factorRelease(f); return null; }
  return f;
}

export function factorRelease(f: Factor): void {
  release(f.panels);
  release(f.updates);
  release(f.floors);
  release(changetype<usize>(f));
}

/** Starts (again) with these values of the pattern's entries, f64[nnzA]; they must stay until the factorization ends. */
export function factorBegin(f: Factor, values: usize): void {
  f.values = values;
  f.at = 0;
  f.phase = GATHER;
  f.done = 0;
}

/** Does about `budget` units of work. OK when L is complete, RUNNING, or 1 + the caller's unknown whose pivot is not safely positive
 *  (see factorPivot). After a failure L is unusable until a factorization succeeds. */
export function factorAdvance(f: Factor, budget: f64): i32 {
  const s = f.symbolic;
  let spent: f64 = 0;
  for (; f.at < s.supernodes; ++f.at) {
    const t = f.at, width = i32At(s.first, t + 1) - i32At(s.first, t), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t);
    const update = f.updates + (<usize>u32At(s.update, t) << 3), leadUpdate = (below + 1) & ~1;
    const hasChildren = i32At(s.childStart, t) < i32At(s.childStart, t + 1);
    if (f.phase == GATHER) {
      memory.fill(panel, 0, <usize>(width * lead) << 3);
      scatterValues(s, t, f.values, panel);
      for (let j = 0; j < width; ++j) setF64(f.floors, j, PIVOT_FLOOR * f64At(panel, j * lead + j));
      if (hasChildren) {
        memory.fill(update, 0, <usize>(below * leadUpdate) << 3);
        for (let e = i32At(s.childStart, t), end = i32At(s.childStart, t + 1); e < end; ++e) {
          const c = i32At(s.children, e);
          addUpdate(s, c, f.updates + (<usize>u32At(s.update, c) << 3), width, panel, lead, update, leadUpdate);
        }
      }
      spent += UNITS_PER_SUPERNODE + <f64>(width * lead);
      f.phase = PANEL;
      f.from = 0;
    }
    if (f.phase == PANEL) {
      while (f.from < width) {
        if (spent >= budget) return RUNNING;
        const to = min(f.from + SLICE, width);
        const failed = factorPanel(width + below, width, panel, lead, f.floors, f.from, to);
        if (failed) {
          f.pivot = f64At(panel, (failed - 1) * (lead + 1));
          return 1 + i32At(s.order, i32At(s.first, t) + failed - 1);
        }
        spent += <f64>(to - f.from) * <f64>(width + below - f.from) * <f64>to / FLOPS_PER_UNIT;
        f.from = to;
      }
      f.phase = UPDATE;
      f.from = 0;
    }
    const mode = hasChildren ? SUBTRACT : NEGATE, a = panel + (<usize>width << 3);
    while (f.from < below) {
      if (spent >= budget) return RUNNING;
      // Whole when it is small; else a block of columns: its triangle, then the rectangle under it.
      const columns = below <= 2 * SLICE ? below : min(SLICE, below - f.from), rest = below - f.from - columns;
      const rows = a + (<usize>f.from << 3), corner = update + (<usize>(f.from * leadUpdate + f.from) << 3);
      rankUpdateLower(columns, width, rows, lead, corner, leadUpdate, mode);
      if (rest) {
        const under = <usize>columns << 3;
        multiply(rest, columns, width, rows + under, lead, rows, lead, 1, corner + under, leadUpdate, mode);
      }
      spent += <f64>columns * <f64>(columns + 2 * rest) * <f64>width / FLOPS_PER_UNIT;
      f.from += columns;
    }
    f.done += panelFlops(width, below);
    f.phase = GATHER;
    if (spent >= budget && t + 1 < s.supernodes) { ++f.at; return RUNNING; }
  }
  return OK;
}


/** Work done ÷ work of the whole factorization, 0 to 1. */
export function factorProgress(f: Factor): f64 {
  return f.symbolic.panelFlops > 0 ? f.done / f.symbolic.panelFlops : 1;
}
export function factorPivot(f: Factor): f64 { return f.pivot; }

/** log det A = 2 Σ log L[c, c].  Cost: n logarithms. */
export function logDeterminant(f: Factor): f64 {
  const s = f.symbolic;
  let sum: f64 = 0;
  for (let t = 0; t < s.supernodes; ++t) {
    const width = i32At(s.first, t + 1) - i32At(s.first, t), step = i32At(s.lead, t) + 1;
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3);
    for (let j = 0; j < width; ++j) sum += Math.log(f64At(panel, j * step));
  }
  return 2 * sum;
}

/** max A[j, j] ÷ L[j, j]², how far elimination shrank a pivot: a lower bound on the condition number of A scaled to unit diagonal, since
 *  1 ÷ L[j, j]² is at most (A⁻¹)[j, j].  diagonal f64[n]: A's, caller's numbering.  1 for order 0.  Cost: n divisions. */
export function pivotSpread(f: Factor, diagonal: usize): f64 {
  const s = f.symbolic;
  let spread: f64 = 1;
  for (let t = 0; t < s.supernodes; ++t) {
    const first = i32At(s.first, t), width = i32At(s.first, t + 1) - first, step = i32At(s.lead, t) + 1;
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3);
    for (let j = 0; j < width; ++j) {
      const root = f64At(panel, j * step), ratio = f64At(diagonal, i32At(s.order, first + j)) / (root * root);
      if (ratio > spread) spread = ratio;
    }
  }
  return spread;
}

/** The caller's unknown j with the largest A[j, j] ÷ L[j, j]²: the one of which the least is left, given those eliminated before it. */
export function weakestUnknown(f: Factor, diagonal: usize): i32 {
  const s = f.symbolic;
  let weakest = 0, spread: f64 = 0;
  for (let t = 0; t < s.supernodes; ++t) {
    const first = i32At(s.first, t), width = i32At(s.first, t + 1) - first, step = i32At(s.lead, t) + 1;
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3);
    for (let j = 0; j < width; ++j) {
      const unknown = i32At(s.order, first + j), root = f64At(panel, j * step), ratio = f64At(diagonal, unknown) / (root * root);
      if (ratio > spread) { spread = ratio; weakest = unknown; }
    }
  }
  return weakest;
}
