// Is this reading consistent with what is known? The squared Mahalanobis distance against χ².
// Source: P. C. Mahalanobis, "On the generalized distance in statistics" (1936); gating: Y. Bar-Shalom, X. R. Li, T. Kirubarajan,
// "Estimation with Applications to Tracking and Navigation" (2001), 5.4.
import { chiSquare } from "./distributions.js";
import { ArgumentError, CovarianceError } from "./errors.js";
import { choleskyOf, forwardSolve, type Matrix, sumOfSquares, symmetricMatrix, vector } from "./small-matrix.js";
import { percent, upperTest, type Verdict } from "./verdict.js";

/** A right reading is refused once in a hundred: common practice, no source. */
const usualLevel = 0.01;

/**
 * d² = νᵀ S⁻¹ ν against χ²(m): small when the innovation ν is as its covariance S says.
 * @param innovation ν, length m, in the reading's units.  @param covariance S, m × m: prediction and noise together.
 * @param options `level`: the share of right readings that may be refused, 0.01 unless given.
 * @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError}  Cost O(m³).
 */
export function gate(
  innovation: ArrayLike<number>,
  covariance: Matrix,
  { level = usualLevel }: { level?: number } = {},
): Verdict<"consistent" | "inconsistent"> {
  const nu = vector("innovation", innovation);
  const factor = choleskyOf("covariance", symmetricMatrix("covariance", covariance, nu.length), nu.length);
  const test = upperTest(sumOfSquares(forwardSolve(factor, nu.length, nu)), chiSquare(nu.length), level);
  const fits = test.statistic <= test.threshold;
  return {
    ...test,
    verdict: fits ? "consistent" : "inconsistent",
    because: `A right reading lies this far off or farther ${percent(test.probability)} of the time; the gate refuses the outermost ${percent(level)}${
      fits ? "" : ", and this is one of them"
    }.`,
  };
}

/** Many candidates of one dimension at once. */
export interface Candidates {
  /** m, the dimension of each innovation. */
  readonly dimension: number;
  /** Innovations one after another, count × m. */
  readonly innovations: ArrayLike<number>;
  /** Their covariances one after another, count × m × m, row-major; the lower triangles are read. */
  readonly covariances: ArrayLike<number>;
}

/** {@link gate} for thousands of candidates: `mahalanobisSquared[k]` and `consistent[k]` (1 or 0) of candidate k, one threshold for all.
 *  @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError} naming the candidate.  Cost O(count · m³), no allocation a candidate. */
export function gateAll(
  { dimension: m, innovations, covariances }: Candidates,
  { level = usualLevel }: { level?: number } = {},
): { mahalanobisSquared: Float64Array; consistent: Uint8Array; threshold: number } {
  const threshold = chiSquare(m).isf(level);
  const count = innovations.length / m;
  if (!Number.isInteger(count)) throw new ArgumentError("length of innovations", innovations.length, `give ${m} numbers a candidate.`);
  if (covariances.length !== count * m * m)
    throw new ArgumentError("length of covariances", covariances.length, `${count} candidates of dimension ${m} need ${count * m * m}.`);
  const mahalanobisSquared = new Float64Array(count);
  const consistent = new Uint8Array(count);
  const row = new Float64Array(m * m);
  const solved = new Float64Array(m);
  for (let k = 0; k < count; ++k) {
    const s = k * m * m;
    let sum = 0;
    // one pass: row i of the Cholesky factor, then entry i of L⁻¹ν
    for (let i = 0; i < m; ++i) {
      let value = innovations[k * m + i]!;
      for (let j = 0; j <= i; ++j) {
        let entry = covariances[s + i * m + j]!;
        for (let l = 0; l < j; ++l) entry -= row[i * m + l]! * row[j * m + l]!;
        if (j < i) row[i * m + j] = entry / row[j * m + j]!;
        else if (entry > m * Number.EPSILON * covariances[s + i * m + i]!) row[i * m + i] = Math.sqrt(entry);
        else
          throw new CovarianceError("covariances", `of candidate ${k} is not positive definite at component ${i}.`, {
            candidate: k,
            component: i,
          });
      }
      for (let l = 0; l < i; ++l) value -= row[i * m + l]! * solved[l]!;
      solved[i] = value / row[i * m + i]!;
      sum += solved[i]! * solved[i]!;
    }
    if (!Number.isFinite(sum))
      throw new ArgumentError(`innovation of candidate ${k}`, sum, "give finite innovations and covariances only.");
    mahalanobisSquared[k] = sum;
    consistent[k] = sum <= threshold ? 1 : 0;
  }
  return { mahalanobisSquared, consistent, threshold };
}
