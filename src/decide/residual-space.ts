// What the adjustment leaves of one reading's noise, direction by direction: the ground of the residual tests and of reliability.
import { choleskyOf, forwardSolve, type Matrix, symmetricMatrix, vector, whitened } from "./small-matrix.js";
import { symmetricEigen } from "./symmetric-eigen.js";

/** Below this share of a direction's variance its residual is rounding, and no test of it means anything: a bias there would have to pass
 *  some 4 000 standard deviations to be seen. */
export const leastRedundancy = 1e-6;

/** One direction of a reading: noise of unit variance in it leaves a residual of variance `redundancy`. */
interface Direction {
  readonly redundancy: number;
  /** Unit vector in whitened units: L⁻¹ v with R = L Lᵀ. */
  readonly vector: Float64Array;
}

export interface ResidualSpace {
  readonly dimension: number;
  /** L with R = L Lᵀ, row-major. */
  readonly noiseFactor: Float64Array;
  /** The directions in which a bias shows at all, best controlled first. */
  readonly controlled: readonly Direction[];
  /** The others. */
  readonly uncontrolled: readonly Direction[];
  /** Redundancy number, the trace of R⁻¹ Qᵥ: between 0 and the dimension. */
  readonly redundancy: number;
}

/** Eigenvectors of L⁻¹ Qᵥ L⁻ᵀ, R = L Lᵀ, eigenvalues in [0, 1].
 *  @param noiseCovariance R, m × m.  @param residualCovariance Qᵥ = R − J Σ Jᵀ, m × m, may be singular.  @throws {CovarianceError} */
export function residualSpace(noiseCovariance: Matrix, residualCovariance: Matrix, dimension: number): ResidualSpace {
  const noiseFactor = choleskyOf("noiseCovariance", symmetricMatrix("noiseCovariance", noiseCovariance, dimension), dimension);
  const q = symmetricMatrix("residualCovariance", residualCovariance, dimension);
  const { values, vectors } = symmetricEigen(whitened(noiseFactor, dimension, q), dimension);
  const directions = vectors.map((v, k) => ({ redundancy: values[k]!, vector: v }));
  return {
    dimension,
    noiseFactor,
    controlled: directions.filter(({ redundancy }) => redundancy > leastRedundancy),
    uncontrolled: directions.filter(({ redundancy }) => redundancy <= leastRedundancy),
    redundancy: Math.max(
      0,
      values.reduce((sum, value) => sum + value, 0),
    ),
  };
}

/** The residual along each controlled direction over its own standard deviation: standard normal, independent, when nothing is wrong.
 *  @throws {ArgumentError} another length, or a value that is not finite. */
export function standardizedResidual({ dimension, noiseFactor, controlled }: ResidualSpace, residual: ArrayLike<number>): Float64Array {
  const v = forwardSolve(noiseFactor, dimension, vector("residual", residual, dimension));
  return Float64Array.from(
    controlled,
    ({ redundancy, vector: u }) => u.reduce((sum, ui, i) => sum + ui * v[i]!, 0) / Math.sqrt(redundancy),
  );
}
