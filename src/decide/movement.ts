// Is this displacement real? The displacement of one state between two epochs against its covariance.
// Sources: H. Pelzer, "Zur Analyse geodätischer Deformationsmessungen", Deutsche Geodätische Kommission C 164 (1971); W. Baarda (1968).
import { chiSquare, fisherF } from "./distributions.js";
import { noncentrality } from "./noncentrality.js";
import { requireDegreesOfFreedom, requireLevel, requirePositive } from "./require.js";
import type { EstimatedFactor } from "./residual-test.js";
import { choleskyOf, forwardSolve, type Matrix, sumOfSquares, symmetricMatrix, vector } from "./small-matrix.js";
import { symmetricEigen } from "./symmetric-eigen.js";
import { inWords, percent, upperTest, type Verdict } from "./verdict.js";

export interface MovementVerdict extends Verdict<"moved" | "no movement shown"> {
  /** Length of the displacement, in its unit. */
  readonly length: number;
  readonly power: number;
  /** The smallest movement found with the stated power: along the direction where the network sees least, and where it sees best. */
  readonly smallestDetectable: { readonly worst: number; readonly best: number; readonly worstDirection: Float64Array };
}

/**
 * T = dᵀ Σ⁻¹ d against χ²(q), or T / (q σ̂₀²) against F(q, r) when the variance factor of both epochs is estimated with r degrees of freedom.
 * Along a unit vector u a movement of √(λ₀ / (uᵀ Σ⁻¹ u)) is found with the stated power, √(λ₀ λₘₐₓ(Σ)) along the worst.
 * @param input `displacement` d, length q; `covariance` Σ_d, q × q: Σ₁ + Σ₂ − Σ₁₂ − Σ₂₁, with the cross term of epochs that share states.
 * @param options `level` 0.05 and `power` 0.80 unless given; `varianceFactor`; `name` for the sentence. The smallest movement takes an
 * estimated factor as exact, which is short by a few percent where r is below about 20.
 * @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError}  @throws {DegreesOfFreedomError}
 */
export function displacementTest(
  { displacement, covariance }: { displacement: ArrayLike<number>; covariance: Matrix },
  {
    level = 0.05,
    power = 0.8,
    varianceFactor,
    name = "The state",
  }: { level?: number; power?: number; varianceFactor?: EstimatedFactor; name?: string } = {},
): MovementVerdict {
  requireLevel("level", level);
  const d = vector("displacement", displacement);
  const q = d.length;
  const sigma = symmetricMatrix("covariance", covariance, q);
  const squares = sumOfSquares(forwardSolve(choleskyOf("covariance", sigma, q), q, Float64Array.from(d)));
  const factor = varianceFactor ? requirePositive("varianceFactor.value", varianceFactor.value) : 1;
  const test = varianceFactor
    ? upperTest(squares / (q * factor), fisherF(q, requireDegreesOfFreedom("varianceFactor.redundancy", varianceFactor.redundancy)), level)
    : upperTest(squares, chiSquare(q), level);
  const { values, vectors } = symmetricEigen(sigma, q);
  const lambda = noncentrality(q, level, power) * factor;
  const worst = Math.sqrt(lambda * values[0]!);
  const moved = test.statistic > test.threshold;
  const length = Math.sqrt(sumOfSquares(d));
  return {
    ...test,
    length,
    power,
    smallestDetectable: { worst, best: Math.sqrt(lambda * values[q - 1]!), worstDirection: vectors[0]! },
    verdict: moved ? "moved" : "no movement shown",
    because: moved
      ? `${name} shows ${inWords(length)} of displacement; a state that stands still shows as much, for its precision, ${percent(test.probability)} of the time, below the ${percent(level)} allowed.`
      : `${name} shows ${inWords(length)} of displacement, which its precision explains (${percent(test.probability)} of the time for a state that stands still); a movement of ${inWords(worst)} in the worst direction would have been found ${percent(power)} of the time.`,
  };
}
