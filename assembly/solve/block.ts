/** The block of A⁻¹ on chosen unknowns as a square: Y = L⁻¹E over the reach of them all, the block YᵀY. Nothing cancels on the way, so
 *  where L is ill-conditioned it keeps digits that the recursion of the selected inverse loses.
 *  Source: Golub, Van Loan, "Matrix Computations", section 4.2 (A⁻¹ = L⁻ᵀL⁻¹); the reach: see reach.ts. */
import { allocateArray, release } from "../memory/heap";
import { atF64, i32At, setF64, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY } from "../memory/status";
import { ADD } from "../dense/mode";
import { rankUpdateLower } from "../dense/rank-update";
import { mirror } from "../dense/transpose";
import { Factor } from "../factor/cholesky";
import { addPath, clearMarks } from "./reach";
import { forwardSolve, gatherRoom, stride } from "./triangular";

/** out f64[count × count] = A⁻¹[unknowns, unknowns]. unknowns i32[count], caller's numbering, repeats allowed.  OK or OUT_OF_MEMORY.
 *  Cost: (2 + count) flops × count for each entry of L on the paths from the unknowns to the root. */
export function inverseBlock(f: Factor, unknowns: usize, count: i32, out: usize): i32 {
  const s = f.symbolic, supernodes = s.supernodes, side = stride(count);
  const x = allocateArray(<f64>side * <f64>s.n, 3), buffer = allocateArray(gatherRoom(s, count), 3);
  const list = allocateArray(2 * <f64>supernodes, 2), mark = list + (<usize>supernodes << 2);
  const complete = x && buffer && list;
  if (complete) {
    for (let t = 0; t < supernodes; ++t) setI32(mark, t, 0);
    let from = supernodes;
    for (let c = 0; c < count; ++c) from = addPath(s, i32At(s.supernodeOf, i32At(s.place, i32At(unknowns, c))), list, from, mark);
    clearMarks(list, from, supernodes, mark);
    for (let k = from; k < supernodes; ++k) {
      const t = i32At(list, k), first = i32At(s.first, t);
      memory.fill(atF64(x, first * side), 0, <usize>((i32At(s.first, t + 1) - first) * side) << 3);
    }
    for (let c = 0; c < count; ++c) setF64(x, i32At(s.place, i32At(unknowns, c)) * side + c, 1);
    forwardSolve(f, x, count, list, from, supernodes, buffer);
    memory.fill(out, 0, <usize>(count * count) << 3);
    for (let k = from; k < supernodes; ++k) {
      const t = i32At(list, k), first = i32At(s.first, t);
      rankUpdateLower(count, i32At(s.first, t + 1) - first, atF64(x, first * side), side, out, count, ADD);
    }
    mirror(count, out, count);
  }
  release(x);
  release(buffer);
  release(list);
  return complete ? OK : OUT_OF_MEMORY;
}
