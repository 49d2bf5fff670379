/** The selected inverse: Z = A⁻¹ on the pattern of L, supernode by supernode from the root down, in dense kernels.
 *  With a supernode's columns A and rows below B,  M = L_BA L_AA⁻¹,  Z_BA = −Z_BB M,  Z_AA = (L_AA L_AAᵀ)⁻¹ − Mᵀ Z_BA,
 *  where Z_BB lies wholly within the parent's front. Fronts stand on two stacks (structure.ts), so only those that children still
 *  need take room; what is kept is the panels of Z, or just its diagonal.
 *  Sources: Takahashi, Fagan, Chen (1973), "Formation of a sparse bus impedance matrix and its application to short circuit study";
 *  Erisman, Tinney, "On computing certain elements of the inverse of a sparse matrix", Comm. ACM 18 (1975). */
import { allocate, allocateArray, release } from "../memory/heap";
import { atF64, f64At, i32At, setF64, u32At } from "../memory/access";
import { OK, RUNNING } from "../memory/status";
import { inverseOfProduct, inverseScratch } from "../dense/inverse-of-product";
import { mirror } from "../dense/transpose";
import { NEGATE, SUBTRACT } from "../dense/mode";
import { multiply } from "../dense/multiply";
import { multiplyTransposedLower } from "../dense/multiply-transposed";
import { solveRight } from "../dense/solve-right";
import { Factor } from "../factor/cholesky";
import { panelFlops } from "../symbolic/structure";
import { Symbolic } from "../symbolic/symbolic";

/** Rows of Z_BA formed in one piece of a sliced call. */
const SLICE = 192;
const FLOPS_PER_UNIT = 16.0, UNITS_PER_SUPERNODE = 150.0;

// What is done next to the supernode at hand.
const GATHER = 0, BELOW = 1;

@unmanaged
export class SelectedInverse {
  factor: Factor;
  /** f64[panelEntries]: Z in the panels' places, the square on top whole (both triangles); 0 when only the diagonal is kept. */
  panels: usize;
  /** f64[n]: the diagonal, caller's numbering. */
  diagonal: usize;
  /** f64[frontEntries]: the stacks; f64: M of the largest panel. Given back at the end. */
  fronts: usize;
  m: usize;
  /** inverseScratch(widest) bytes. */
  scratch: usize;
  /** Supernodes still to do, what is next for the present one, and from which row. */
  left: i32;
  phase: i32;
  from: i32;
  /** panelFlops of the finished supernodes. */
  done: f64;
}

/** Starts the selected inverse of a complete factor, which must stay. keepPanels 0: only the diagonal is kept. Null when memory runs
 *  out. */
export function inverseBegin(factor: Factor, keepPanels: bool): SelectedInverse | null {
  const s = factor.symbolic, address = allocateArray(1, 7);
  if (!address) return null;
  assert(offsetof<SelectedInverse>() <= 128);
  memory.fill(address, 0, 128);
  const z = changetype<SelectedInverse>(address);
  z.factor = factor;
  z.diagonal = allocateArray(<f64>s.n, 3);
  z.fronts = allocateArray(s.frontEntries, 3);
  z.m = allocateArray(s.largestBelow, 3);
  z.scratch = allocate(inverseScratch(s.widest));
  if (keepPanels) z.panels = allocateArray(s.panelEntries, 3);
  z.left = s.supernodes;
  if (!z.diagonal || !z.fronts || !z.m || !z.scratch || (keepPanels && !z.panels)) { inverseRelease(z); return null; }
  return z;
}

export function inverseRelease(z: SelectedInverse): void {
  release(z.panels);
  release(z.diagonal);
  release(z.fronts);
  release(z.m);
  release(z.scratch);
  release(changetype<usize>(z));
}

/** Does about `budget` units of work. OK when Z is complete, else RUNNING. */
export function inverseAdvance(z: SelectedInverse, budget: f64): i32 {
  const f = z.factor, s = f.symbolic;
  let spent: f64 = 0;
  for (; z.left > 0; --z.left) {
    const t = z.left - 1, width = i32At(s.first, t + 1) - i32At(s.first, t), below = i32At(s.rowStart, t + 1) - i32At(s.rowStart, t);
    const panel = f.panels + (<usize>u32At(s.panel, t) << 3), lead = i32At(s.lead, t), leadM = (below + 1) & ~1;
    const front = z.fronts + (<usize>u32At(s.front, t) << 3), frontBelow = atF64(front, width), corner = atF64(front, width * (lead + 1));
    if (z.phase == GATHER) {
      if (spent >= budget) return RUNNING;
      if (below) {
        const p = i32At(s.parent, t);
        gather(s, t, z.fronts + (<usize>u32At(s.front, p) << 3), i32At(s.lead, p), corner, lead);
        mirror(below, corner, lead);
        for (let j = 0; j < width; ++j) memory.copy(atF64(z.m, j * leadM), atF64(panel, j * lead + width), <usize>below << 3);
        solveRight(below, width, panel, lead, z.m, leadM);
      }
      spent += UNITS_PER_SUPERNODE + <f64>below * (<f64>below + <f64>width * <f64>width / FLOPS_PER_UNIT);
      z.phase = BELOW;
      z.from = 0;
    }
    while (z.from < below) {
      if (spent >= budget) return RUNNING;
      const rows = min(SLICE, below - z.from);
      multiply(rows, width, below, atF64(corner, z.from), lead, z.m, 1, leadM, atF64(frontBelow, z.from), lead, NEGATE);
      spent += 2 * <f64>rows * <f64>width * <f64>below / FLOPS_PER_UNIT;
      z.from += rows;
    }
    inverseOfProduct(width, panel, lead, front, lead, z.scratch);
    if (below) multiplyTransposedLower(width, below, z.m, leadM, frontBelow, lead, front, lead, SUBTRACT);
    spent += <f64>width * <f64>width * <f64>(below + width) / FLOPS_PER_UNIT;
    for (let j = 0, column = i32At(s.first, t); j < width; ++j) setF64(z.diagonal, i32At(s.order, column + j), f64At(front, j * (lead + 1)));
    if (z.panels) {
      if (below) mirror(width, front, lead);
      memory.copy(z.panels + (<usize>u32At(s.panel, t) << 3), front, <usize>(width * lead) << 3);
    }
    z.done += panelFlops(width, below);
    z.phase = GATHER;
  }
  release(z.fronts);
  release(z.m);
  release(z.scratch);
  z.fronts = 0;
  z.m = 0;
  z.scratch = 0;
  return OK;
}

/** Work done ÷ work of the whole, 0 to 1. */
export function inverseProgress(z: SelectedInverse): f64 {
  const all = z.factor.symbolic.panelFlops;
  return all > 0 ? z.done / all : 1;
}

/** Lower triangle of Z_BB of supernode t: its rows below, out of the lower triangle of the parent's front. */
function gather(s: Symbolic, t: i32, parent: usize, leadParent: i32, corner: usize, lead: i32): void {
  const runs = s.runs + (<usize>i32At(s.runStart, t) << 3), end = s.runs + (<usize>i32At(s.runEnd, t) << 3);
  let into = corner; // the diagonal entry of the column at hand
  for (let run = runs; run < end; run += 8) {
    const position = load<i32>(run), length = load<i32>(run, 4);
    for (let j = 0; j < length; ++j, into += <usize>(lead + 1) << 3) {
      const column = parent + (<usize>((position + j) * leadParent) << 3);
      copyRun(column + (<usize>(position + j) << 3), into, length - j);
      let row = into + (<usize>(length - j) << 3);
      for (let other = run + 8; other < end; other += 8) {
        const count = load<i32>(other, 4);
        copyRun(column + (<usize>load<i32>(other) << 3), row, count);
        row += <usize>count << 3;
      }
    }
  }
}

// @ts-ignore: decorator
@inline
function copyRun(from: usize, into: usize, count: i32): void {
  let k = count;
  for (; k >= 2; k -= 2, from += 16, into += 16) v128.store(into, v128.load(from));
  if (k) store<f64>(into, load<f64>(from));
}

/** Address of the diagonal f64[n], caller's numbering; complete when inverseAdvance said OK. */
export function inverseDiagonal(z: SelectedInverse): usize { return z.diagonal; }
