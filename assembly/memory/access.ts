// Typed loads and stores by element index. All kernel arrays are plain addresses; these inline to one instruction.

// @ts-ignore: decorator
@inline export function i32At(p: usize, k: i32): i32 { return load<i32>(p + (<usize>k << 2)); }
// @ts-ignore: decorator
@inline export function setI32(p: usize, k: i32, v: i32): void { store<i32>(p + (<usize>k << 2), v); }
// @ts-ignore: decorator
@inline export function u32At(p: usize, k: i32): u32 { return load<u32>(p + (<usize>k << 2)); }
// @ts-ignore: decorator
@inline export function setU32(p: usize, k: i32, v: u32): void { store<u32>(p + (<usize>k << 2), v); }
// @ts-ignore: decorator
@inline export function f64At(p: usize, k: i32): f64 { return load<f64>(p + (<usize>k << 3)); }
// @ts-ignore: decorator
@inline export function setF64(p: usize, k: i32, v: f64): void { store<f64>(p + (<usize>k << 3), v); }
// @ts-ignore: decorator
@inline export function addF64(p: usize, k: i32, v: f64): void { const at = p + (<usize>k << 3); store<f64>(at, load<f64>(at) + v); }
// @ts-ignore: decorator
@inline export function addI32(p: usize, k: i32, v: i32): void { const at = p + (<usize>k << 2); store<i32>(at, load<i32>(at) + v); }
/** Address of element k of an array of i32. */
// @ts-ignore: decorator
@inline export function atI32(p: usize, k: i32): usize { return p + (<usize>k << 2); }
/** Address of element k of an array of f64. */
// @ts-ignore: decorator
@inline export function atF64(p: usize, k: i32): usize { return p + (<usize>k << 3); }
