// What kernel calls return. Zero is success; a positive number is 1 + the index of the offending unknown; these are the rest.

// @ts-ignore: decorator
@inline export const OK: i32 = 0;
/** A sliced call has used its budget and has more to do: call advance again. */
// @ts-ignore: decorator
@inline export const RUNNING: i32 = -1;
/** The allocator's limit, or WebAssembly's, would be passed. Nothing was changed. */
// @ts-ignore: decorator
@inline export const OUT_OF_MEMORY: i32 = -2;
/** A count would pass 32 bits (more than 2³¹ − 1 entries). */
// @ts-ignore: decorator
@inline export const TOO_LARGE: i32 = -3;
