/** The one place where the two SIMD builds differ: multiply and add with two roundings in the plain build, with one where
 *  the CPU has it in the build with relaxed SIMD. Two lanes of f64 each. */

/** c + a·b */
// @ts-ignore: decorator
@inline export function madd(a: v128, b: v128, c: v128): v128 {
  return ASC_FEATURE_RELAXED_SIMD ? f64x2.relaxed_madd(a, b, c) : f64x2.add(c, f64x2.mul(a, b));
}

/** c − a·b */
// @ts-ignore: decorator
@inline export function nmadd(a: v128, b: v128, c: v128): v128 {
  return ASC_FEATURE_RELAXED_SIMD ? f64x2.relaxed_nmadd(a, b, c) : f64x2.sub(c, f64x2.mul(a, b));
}
