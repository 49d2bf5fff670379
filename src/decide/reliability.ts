// How large a blunder the test of a reading would let pass, and what it would do to the states.
// Sources: W. Baarda (1968), internal and external reliability; grades of control: W. Förstner (1987), from memory.
import { ArgumentError } from "./errors.js";
import { noncentrality } from "./noncentrality.js";
import { residualSpace } from "./residual-space.js";
import { choleskyOf, forwardSolve, type Matrix, rowMajor, sumOfSquares, symmetricMatrix, vector } from "./small-matrix.js";
import { inWords, percent } from "./verdict.js";

/** Lowest redundancy of a direction for each grade. */
const grades = [
  ["well controlled", 0.3],
  ["fairly controlled", 0.1],
  ["weakly controlled", 0.01],
] as const;

/** The grade of a reading, by the share of a blunder that shows in its residual. */
export function gradeOf(redundancy: number): Reliability["verdict"] {
  return grades.find(([, lowest]) => redundancy >= lowest)?.[0] ?? "uncontrolled";
}

export interface Reliability {
  /** Redundancy number: the share of a bias that shows in the reading's own residual, summed over its components. */
  readonly redundancy: number;
  readonly level: number;
  readonly power: number;
  /** λ₀ of the reading's test. */
  readonly noncentrality: number;
  /** By component, the bias in it alone that the test finds with the stated power; unit of the reading, Infinity where nothing would. */
  readonly minimalDetectableBias: Float64Array;
  /** √(λ₀ (1 − μ) / μ) at the weakest direction of redundancy μ: the largest effect of an undetected bias on any function of the states,
   *  in that function's standard deviations. */
  readonly externalReliability: number;
  readonly verdict: "well controlled" | "fairly controlled" | "weakly controlled" | "uncontrolled";
  readonly because: string;
}

/**
 * Minimal detectable bias ∇ₖ = √(λ₀ / (R⁻¹ Qᵥ R⁻¹)ₖₖ), for one component σ √(λ₀ / r).
 * @param reading R and Qᵥ = R − J Σ Jᵀ, both m × m, and m.
 * @param options `level` 0.001 and `power` 0.80 unless given (Baarda's choice; the level of the single test).
 * @throws {LevelError}  @throws {ArgumentError} power ≤ level.  @throws {CovarianceError}  Cost O(m³) and one search for λ₀.
 */
export function reliability(
  { dimension: m, noiseCovariance, residualCovariance }: { dimension: number; noiseCovariance: Matrix; residualCovariance: Matrix },
  { level = 0.001, power = 0.8 }: { level?: number; power?: number } = {},
): Reliability {
  const { noiseFactor, controlled, uncontrolled, redundancy } = residualSpace(noiseCovariance, residualCovariance, m);
  const lambda = noncentrality(Math.max(1, controlled.length), level, power);
  const minimalDetectableBias = new Float64Array(m);
  for (let k = 0; k < m; ++k) {
    const unit = new Float64Array(m);
    unit[k] = 1;
    forwardSolve(noiseFactor, m, unit); // a bias of one unit in component k, whitened
    const shown = controlled.reduce(
      (sum, { redundancy: mu, vector: u }) => sum + mu * u.reduce((s, ui, i) => s + ui * unit[i]!, 0) ** 2,
      0,
    );
    minimalDetectableBias[k] = Math.sqrt(lambda / shown); // Infinity when nothing shows
  }
  const weakest = uncontrolled.length > 0 ? 0 : controlled.at(-1)!.redundancy;
  const verdict = gradeOf(weakest);
  const found = [...minimalDetectableBias].map((bias) => inWords(bias)).join(", ");
  return {
    redundancy,
    level,
    power,
    noncentrality: lambda,
    minimalDetectableBias,
    externalReliability: Math.sqrt((lambda * Math.max(0, 1 - weakest)) / weakest),
    verdict,
    because:
      verdict === "uncontrolled"
        ? "Hardly any other reading controls this one: a blunder in it would move the states and no test would show it."
        : `${percent(weakest)} of a blunder shows in the residual, so one of ${found} (in the reading's unit, by component) is found ${percent(power)} of the time.`,
  };
}

/**
 * External reliability: what a bias that stays in does to one state, K ∇ with K = Σ Jᵀ R⁻¹, and its size in the state's own standard deviations.
 * @param gain K, d × m: the state's rows of Σ Jᵀ R⁻¹.  @param bias ∇, length m.  @param covariance d × d, of the state.
 * @throws {ArgumentError}  @throws {CovarianceError}
 */
export function biasEffect(
  gain: Matrix,
  bias: ArrayLike<number>,
  covariance: Matrix,
  dimension: number,
): { effect: Float64Array; standardized: number } {
  if (!(Number.isInteger(dimension) && dimension > 0))
    throw new ArgumentError("dimension", dimension, "give the number of the state's unknowns.");
  const b = vector("bias", bias);
  const k = rowMajor("gain", gain, dimension, b.length);
  const effect = Float64Array.from({ length: dimension }, (_, i) => b.reduce((sum, bj, j) => sum + k[i * b.length + j]! * bj, 0));
  const factor = choleskyOf("covariance", symmetricMatrix("covariance", covariance, dimension), dimension);
  return { effect, standardized: Math.sqrt(sumOfSquares(forwardSolve(factor, dimension, Float64Array.from(effect)))) };
}
