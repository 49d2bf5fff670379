// Error ellipse and ellipsoid: the region that holds the true point with a stated confidence.
// Source: the eigenvectors of the covariance and the χ² quantile; F. R. Helmert (1868); e.g. Koch (1999), 2.5.
import { chiSquare } from "./distributions.js";
import { requireLevel } from "./require.js";
import { choleskyOf, type Matrix, symmetricMatrix } from "./small-matrix.js";
import { type SymmetricEigen, symmetricEigen } from "./symmetric-eigen.js";

/** √ of the χ² quantile: semi-axes of the confidence region over standard deviations. In two dimensions √(−2 ln(1 − p)).
 *  @throws {LevelError}  @throws {DegreesOfFreedomError} */
export function confidenceScale(dimension: number, confidence: number): number {
  requireLevel("confidence", confidence);
  return Math.sqrt(chiSquare(dimension).quantile(confidence));
}

/** Eigenvalues and directions of a positive definite covariance. @throws {CovarianceError} */
export function axesOf(covariance: Matrix, dimension: number): SymmetricEigen {
  const a = symmetricMatrix("covariance", covariance, dimension);
  choleskyOf("covariance", a, dimension); // refuses a matrix that is no covariance
  return symmetricEigen(a, dimension);
}

/** The error ellipse of a point in the plane. */
export interface ErrorEllipse {
  /** In the unit of the coordinates, at the confidence asked for. */
  readonly semiMajor: number;
  readonly semiMinor: number;
  /** Direction of the major axis: radians from the second axis (north) towards the first (east), in [0, π). */
  readonly bearing: number;
  /** Semi-axis over standard deviation along it. */
  readonly scale: number;
  readonly confidence: number;
}

/**
 * @param covariance 2 × 2 of (east, north), any unit squared.  @param options `confidence` 0.95 unless given.
 * @throws {CovarianceError}  @throws {LevelError}
 */
export function errorEllipse(covariance: Matrix, { confidence = 0.95 }: { confidence?: number } = {}): ErrorEllipse {
  const scale = confidenceScale(2, confidence);
  const { values, vectors } = axesOf(covariance, 2);
  const [east, north] = vectors[0]! as unknown as [number, number];
  const bearing = Math.atan2(east, north);
  return {
    semiMajor: scale * Math.sqrt(values[0]!),
    semiMinor: scale * Math.sqrt(values[1]!),
    bearing: bearing < 0 ? bearing + Math.PI : bearing === Math.PI ? 0 : bearing, // an axis has no head
    scale,
    confidence,
  };
}

/** One semi-axis of an error ellipsoid. */
export interface EllipsoidAxis {
  readonly length: number;
  /** Unit vector (east, north, up), turned so that it does not point down. */
  readonly direction: readonly [number, number, number];
  /** Radians from north towards east, in [0, 2π). */
  readonly bearing: number;
  /** Radians above the horizon, in [0, π/2]. */
  readonly elevation: number;
}

/**
 * The error ellipsoid of a point in space: semi-axes, longest first.
 * @param covariance 3 × 3 of (east, north, up).  @param options `confidence` 0.95 unless given.
 * @throws {CovarianceError}  @throws {LevelError}
 */
export function errorEllipsoid(
  covariance: Matrix,
  { confidence = 0.95 }: { confidence?: number } = {},
): { axes: readonly EllipsoidAxis[]; scale: number; confidence: number } {
  const scale = confidenceScale(3, confidence);
  const { values, vectors } = axesOf(covariance, 3);
  const axes = vectors.map((v, k) => {
    const sign = v[2]! < 0 ? -1 : 1;
    const [east, north, up] = [sign * v[0]!, sign * v[1]!, sign * v[2]!];
    const bearing = Math.atan2(east, north);
    return {
      length: scale * Math.sqrt(values[k]!),
      direction: [east, north, up] as const,
      bearing: bearing < 0 ? bearing + 2 * Math.PI : bearing,
      elevation: Math.atan2(up, Math.hypot(east, north)),
    };
  });
  return { axes, scale, confidence };
}
