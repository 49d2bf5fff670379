// What a product does to C. The low bit: C is read; the next: the product is subtracted.

/** C := A·B */
// @ts-ignore: decorator
@inline export const ASSIGN = 0;
/** C := C + A·B */
// @ts-ignore: decorator
@inline export const ADD = 1;
/** C := −A·B */
// @ts-ignore: decorator
@inline export const NEGATE = 2;
/** C := C − A·B */
// @ts-ignore: decorator
@inline export const SUBTRACT = 3;
// @ts-ignore: decorator
@inline export function isFresh(mode: i32): bool { return (mode & 1) == 0; }
// @ts-ignore: decorator
@inline export function isNegative(mode: i32): bool { return mode >= NEGATE; }
/** The mode of the further terms of a sum whose first part ran in `mode`. */
// @ts-ignore: decorator
@inline export function continued(mode: i32): i32 { return mode | 1; }
/** Bytes of a stride in elements, of either sign (address arithmetic wraps). */
// @ts-ignore: decorator
@inline export function bytes(stride: i32): usize { return <usize>stride << 3; }
/** Address of entry (i, j) of a column-major matrix. */
// @ts-ignore: decorator
@inline export function entry(a: usize, lda: i32, i: i32, j: i32): usize { return a + ((<usize>i + <usize>j * <usize>lda) << 3); }
