/** The lower triangle of C ± A·B, C n × n, in strips of four columns: a square tile on the diagonal and the rows below it. Inlined; parameters
 *  and order of summation as in tile.ts. */
import { Four, Lower, One, Plain, Store, strip, Three, tile, Two } from "./tile";

// @ts-ignore: decorator
@inline export function triangle<SIGN, LAYOUT>(
  fresh: bool, n: i32, k: i32, a: usize, aCol: usize, b: usize, bRow: usize, bCol: usize, c: usize, cCol: usize,
): void {
  const none = f64x2.splat(0), aNext: usize = sizeof<LAYOUT>() == sizeof<Plain>() ? 32 : aCol << 2;
  for (; n >= 4; n -= 4, a += aNext, b += bCol << 2, c += 32 + (cCol << 2)) {
    tile<Four, Four, SIGN, LAYOUT, Lower>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
    strip<Four, SIGN, LAYOUT, Store>(fresh, n - 4, k, a + aNext, aCol, b, bRow, bCol, c + 32, cCol, none, none, none, none);
  }
  if (n == 3) tile<Three, Three, SIGN, LAYOUT, Lower>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 2) tile<Two, Two, SIGN, LAYOUT, Lower>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
  else if (n == 1) tile<One, One, SIGN, LAYOUT, Lower>(fresh, k, a, aCol, b, bRow, bCol, c, cCol, none, none, none, none);
}
