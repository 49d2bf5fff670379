/** C ± A·B, C m × n, in strips of four columns and a rest. Inlined; parameters and order of summation as in tile.ts. */
import { Four, One, Store, strip, Three, Two } from "./tile";

// @ts-ignore: decorator
@inline export function rectangle<SIGN, LAYOUT>(
  fresh: bool, m: i32, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  const none = f64x2.splat(0);
  for (; n >= 4; n -= 4, b += bCol << 2, c += cCol << 2) {
    strip<Four, SIGN, LAYOUT, Store>(fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  }
  if (n == 3) strip<Three, SIGN, LAYOUT, Store>(fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 2) strip<Two, SIGN, LAYOUT, Store>(fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 1) strip<One, SIGN, LAYOUT, Store>(fresh, m, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
}
