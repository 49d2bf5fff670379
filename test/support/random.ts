/** A generator of uniform numbers in [0, 1) from a seed, the same on every machine: Steele, Lea, Flood (2014), "Fast Splittable
 *  Pseudorandom Number Generators", in the 32-bit form known as mulberry32. */
export function seeded(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let z = Math.imul(state ^ (state >>> 15), state | 1);
    z ^= z + Math.imul(z ^ (z >>> 7), z | 61);
    return ((z ^ (z >>> 14)) >>> 0) / 4294967296;
  };
}
