// Can the blunder of one reading be told from that of another? The correlation of their test statistics.
// Source: W. Förstner, "Reliability and discernability of extended Gauss–Markov models", Deutsche Geodätische Kommission A 98 (1983);
// canonical correlation for readings of several components: H. Hotelling, Biometrika 28 (1936) 321.
import { requireLevel } from "./require.js";
import { choleskyOf, forwardSolve, type Matrix, rowMajor, symmetricMatrix, transposed } from "./small-matrix.js";
import { symmetricEigen } from "./symmetric-eigen.js";
import { inWords } from "./verdict.js";

export interface SuspectPair {
  /** |ρ| of the two statistics; the largest canonical correlation for readings of several components. */
  readonly correlation: number;
  readonly limit: number;
  readonly verdict: "separable" | "not separable";
  readonly because: string;
}

/**
 * ρ = Q₁₂ / √(Q₁₁ Q₂₂), or the largest singular value of L₁⁻¹ Q₁₂ L₂⁻ᵀ. It is the same for residuals v and for R⁻¹ v.
 * @param covariances residual covariances of both readings (m₁ × m₁, m₂ × m₂, positive definite) and between them (m₁ × m₂).
 * @param options `limit`: above it the pair counts as not separable; 0.9 unless given (common practice, no source); `names` for the sentence.
 * @throws {CovarianceError} a residual covariance is not positive definite: a reading without redundancy is no suspect.  @throws {LevelError}
 */
export function suspectCorrelation(
  { first, second, between, dimensions }: { first: Matrix; second: Matrix; between: Matrix; dimensions: readonly [number, number] },
  { limit = 0.9, names = ["the first", "the second"] }: { limit?: number; names?: readonly [string, string] } = {},
): SuspectPair {
  requireLevel("limit", limit);
  const [m, n] = dimensions;
  const firstFactor = choleskyOf("first", symmetricMatrix("first", first, m), m);
  const secondFactor = choleskyOf("second", symmetricMatrix("second", second, n), n);
  const half = forwardSolve(firstFactor, m, rowMajor("between", between, m, n), n); // L₁⁻¹ Q₁₂
  const c = forwardSolve(secondFactor, n, transposed(half, m, n), m); // its transpose, n × m, whitened on both sides
  const gram = new Float64Array(n * n);
  for (let i = 0; i < n; ++i) for (let j = 0; j < n; ++j) for (let k = 0; k < m; ++k) gram[i * n + j]! += c[i * m + k]! * c[j * m + k]!;
  const correlation = Math.min(1, Math.sqrt(Math.max(0, symmetricEigen(gram, n).values[0]!)));
  const separable = correlation <= limit;
  return {
    correlation,
    limit,
    verdict: separable ? "separable" : "not separable",
    because: separable
      ? `The tests of ${names[0]} and ${names[1]} are correlated by ${inWords(correlation)}: a blunder in one shows in its own test first.`
      : `The tests of ${names[0]} and ${names[1]} are correlated by ${inWords(correlation)}: a blunder in either looks like one in the other, so check both, or add a reading that involves only one of them.`,
  };
}
