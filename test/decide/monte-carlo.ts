// Seeded simulations for the verdicts: how often something happens, and how far that may lie from its stated rate.
import { inverse, Matrix } from "ml-matrix";
import { random } from "../../bench/families/random.js";

const draws = 2000;

/** Events in 2 000 seeded draws, minus the expected number, over 4 binomial standard deviations: at most 1 except once in 16 000 seeds. */
export function deviationFromRate(seed: number, rate: number, event: (normal: () => number) => boolean): number {
  const { normal } = random(seed);
  let events = 0;
  for (let draw = 0; draw < draws; ++draw) if (event(normal)) events += 1;
  return Math.abs(events - draws * rate) / (4 * Math.sqrt(draws * rate * (1 - rate)));
}

/** A draw with covariance L Lᵀ, L lower triangular. */
export const draw = (factor: readonly (readonly number[])[], normal: () => number): number[] => {
  const z = factor.map(normal);
  return factor.map((row) => row.reduce((sum, entry, k) => sum + entry * z[k]!, 0));
};

export const covarianceOf = (factor: readonly (readonly number[])[]): number[][] => {
  const l = new Matrix(factor.map((row) => factor.map((_, j) => row[j] ?? 0)));
  return l.mmul(l.transpose()).to2DArray();
};

/** A random lower triangular factor with a positive diagonal. */
export const randomFactor = (order: number, normal: () => number): number[][] =>
  Array.from({ length: order }, (_, i) =>
    Array.from({ length: order }, (_, j) => (j < i ? normal() : j === i ? 0.3 + Math.abs(normal()) : 0)),
  );

/** A linear adjustment by dense algebra of a general library: readings y = A x + e, e of covariance R. */
export function adjustment(design: number[][], noise: number[][]) {
  const a = new Matrix(design);
  const r = new Matrix(noise);
  const weight = inverse(r);
  const sigma = inverse(a.transpose().mmul(weight).mmul(a));
  const gain = sigma.mmul(a.transpose()).mmul(weight);
  const residualCovariance = r.clone().sub(a.mmul(sigma).mmul(a.transpose()));
  return {
    covariance: sigma.to2DArray(),
    gain: gain.to2DArray(),
    residualCovariance: residualCovariance.to2DArray(),
    redundancy: design.length - design[0]!.length,
    residuals: (y: number[]): number[] => {
      const column = Matrix.columnVector(y);
      return column
        .clone()
        .sub(a.mmul(gain.mmul(column)))
        .to1DArray();
    },
    weightedSquares: (v: number[]): number => {
      const column = Matrix.columnVector(v);
      return column.transpose().mmul(weight).mmul(column).get(0, 0);
    },
  };
}
