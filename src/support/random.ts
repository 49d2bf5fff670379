// Seeded random numbers, the same on every machine: xoshiro128** (Blackman, Vigna, "Scrambled linear pseudorandom number generators",
// ACM Trans. Math. Softw. 47, 2021), its state filled by the 32-bit finalizer of MurmurHash3 over a Weyl sequence.

export interface Random {
  /** Uniform in [0, 1), 32 random bits. */
  uniform(): number;
  /** Uniform integer in [0, bound). */
  below(bound: number): number;
  /** Standard normal: Marsaglia, Bray (1964), the polar method; one number a call. */
  normal(): number;
}

export function random(seed: number): Random {
  let weyl = seed | 0;
  const mixed = (): number => {
    weyl = (weyl + 0x9e3779b9) | 0;
    let z = Math.imul(weyl ^ (weyl >>> 16), 0x85ebca6b);
    z = Math.imul(z ^ (z >>> 13), 0xc2b2ae35);
    return z ^ (z >>> 16);
  };
  const next = xoshiro128([mixed(), mixed(), mixed(), mixed()]);
  const uniform = (): number => next() / 2 ** 32;
  return {
    uniform,
    below: (bound) => Math.floor(uniform() * bound),
    normal: () => {
      for (;;) {
        const x = 2 * uniform() - 1;
        const y = 2 * uniform() - 1;
        const s = x * x + y * y;
        if (s > 0 && s < 1) return x * Math.sqrt((-2 * Math.log(s)) / s);
      }
    },
  };
}

/** The bare generator: unsigned 32-bit integers from a state that is not all zeros. */
export function xoshiro128([a, b, c, d]: [number, number, number, number]): () => number {
  const rotate = (x: number, k: number): number => (x << k) | (x >>> (32 - k));
  return () => {
    const result = Math.imul(rotate(Math.imul(b, 5), 7), 9);
    const shifted = b << 9;
    c ^= a;
    d ^= b;
    b ^= c;
    a ^= d;
    c ^= shifted;
    d = rotate(d, 11);
    return result >>> 0;
  };
}
