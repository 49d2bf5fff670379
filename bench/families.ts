// The families that bench and tests share: seeded, each as a stream of measurements in order of arrival and as an information matrix.
import { chain } from "./families/chain.js";
import { grid } from "./families/grid.js";
import { helix } from "./families/helix.js";
import { landmarks } from "./families/landmarks.js";
import { net } from "./families/net.js";
import { type PatrolOptions, patrol } from "./families/patrol.js";
import type { Stream } from "./families/stream.js";

export interface Family {
  readonly about: string;
  /** Sizes of the bench, in states. */
  readonly sizes: readonly number[];
  /** Any size from 2 states up. */
  make(states: number, seed?: number): Stream;
}

/** Densities are tuned so that the flops of a factor under minimum degree come near those of real networks of the kind (bench/README.md). */
export const families = {
  net: {
    about: "monitoring network: points × 2, range and direction between neighbours, a few points fixed",
    sizes: [1000, 10_000, 100_000],
    make: (states, seed = 1) => net(states, { seed }),
  },
  patrol: {
    about: "yard patrol: planar poses × 3, 5.5 % of steps recognize an earlier spot",
    sizes: [3500, 10_000, 100_000],
    make: (states, seed = 1) => patrol(states, { seed, side: Math.max(2, Math.round(50 * (states / 10_000) ** 0.645)), revisits: 0.055 }),
  },
  heavy: {
    about: "heavy patrol: planar poses × 3 on a yard of side √n ÷ 4, 28 % of steps recognize an earlier spot",
    sizes: [1000, 10_000, 100_000],
    make: (states, seed = 1) => patrol(states, heavyYard(states, seed)),
  },
  heavySpatial: {
    about: "the heavy patrol with spatial poses × 6",
    sizes: [1000, 10_000],
    make: (states, seed = 1) => patrol(states, { ...heavyYard(states, seed), dimension: 6 }),
  },
  helix: {
    about: "climbing spiral: spatial poses × 6, each tied to the one a coil below",
    sizes: [2500, 10_000],
    make: (states, seed = 1) => helix(states, { seed, posesPerCoil: Math.max(2, Math.round(0.82 * Math.sqrt(states))) }),
  },
  landmarks: {
    about: "planar poses × 3 that see landmarks × 2: ten poses to three landmarks",
    sizes: [6500],
    make: (states, seed = 2) => {
      const poses = Math.ceil((10 * states) / 13);
      return landmarks(poses, states - poses, { seed, side: Math.max(2, Math.round(36 * Math.sqrt(states / 6500))) });
    },
  },
  chain: {
    about: "planar poses × 3 in one line, a position fix each 50",
    sizes: [1000, 10_000, 100_000],
    make: (states, seed = 1) => chain(states, { seed }),
  },
  grid: {
    about: "five-point Laplacian of a square, scalar states",
    sizes: [1_000_000],
    make: (states, seed = 1) => {
      const rows = Math.floor(Math.sqrt(states));
      return grid(rows, Math.ceil(states / rows), seed);
    },
  },
} satisfies Record<string, Family>;

export type FamilyName = keyof typeof families;

function heavyYard(states: number, seed: number): PatrolOptions {
  return { seed, side: Math.max(2, Math.round(Math.sqrt(states) / 4)), revisits: 0.28, straightOn: 0.85 };
}
