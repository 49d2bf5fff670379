// Which readings are to be doubted: data snooping, one neighbourhood after another, until nothing stands out any more.
// Sources: W. Baarda (1968) (the test of one reading at a time); J. J. Kok, "On data snooping and multiple outlier testing", NOAA Technical
// Report NOS NGS 30 (1984) (the worst set aside, the rest tested anew); statistics of different dimension compared by their ratio to the
// critical value, and readings taken in again that fit after all: common practice, no source.

import { UndeterminedError } from "../../estimate/commit-errors.js";
import type { ReadingKey } from "../../model/adjustment.js";
import { chiSquare } from "../distributions.js";
import { ArgumentError } from "../errors.js";
import { perTestLevel } from "../family-level.js";
import { gradeOf, type Reliability, reliability } from "../reliability.js";
import { requireLevel } from "../require.js";
import { leastRedundancy, residualSpace, standardizedResidual } from "../residual-space.js";
import { type ResidualVerdict, residualTest } from "../residual-test.js";
import { sumOfSquares } from "../small-matrix.js";
import { suspectCorrelation } from "../suspects.js";
import { type GivenReading, type Network, noiseCovariance, product, solveSymmetric } from "./network.js";

/** A reading that does not fit what the others say. SI units and radians. */
export interface Suspect {
  readonly reading: GivenReading;
  /** Measured minus what all readings that are not suspect say: how large the blunder is, if it is one. */
  readonly discrepancy: Float64Array;
  /** Of the discrepancy. */
  readonly standardDeviations: Float64Array;
  /** At the level of the single test. */
  readonly verdict: ResidualVerdict;
  /** What bias the test would have found; at the level of the single test. */
  readonly reliability: Reliability;
  /** Readings whose tests can hardly be told from this one's: the blunder may be theirs. */
  readonly confusable: readonly { readonly reading: GivenReading; readonly correlation: number }[];
}

/** How well readings are controlled by the others, over all of them. */
export interface Control {
  /** Number of readings by grade, by the share of a blunder that shows in the reading's residual (of several rows, on average). */
  readonly grades: Readonly<Record<Reliability["verdict"], number>>;
  /** The least controlled ones, least first; `redundancy` is that share. */
  readonly least: readonly { readonly reading: GivenReading; readonly redundancy: number }[];
}

export interface Screening {
  /** Most conspicuous first; empty when `overwhelmed`. */
  readonly suspects: readonly Suspect[];
  /** The chance that a network without blunders raises any suspect, and the level of each test that follows from it. */
  readonly level: number;
  readonly testLevel: number;
  readonly tests: number;
  /** So many readings stand out that they cannot be blunders: how many at first sight. Nothing is set aside then. */
  readonly overwhelmed: number | undefined;
  readonly control: Control;
}

export interface ScreeningOptions {
  /** Default 0.05. */
  readonly level?: number;
  /** Of the bias that counts as detectable. Default 0.80. */
  readonly power?: number;
  /** More suspects than this are no blunders. Default: 10, or a hundredth of the readings when that is more. */
  readonly mostSuspects?: number;
  /** Told, before each round, how many readings have been set aside so far. */
  readonly onRound?: (setAside: number) => void;
}

/** Tests correlated by more than this are hard to tell apart (common practice, no source). */
const confusableFrom = 0.9;
/** Rivals looked at for one suspect, and shown. */
const mostRivals = 12;
const leastShown = 10;

/** A reading in force and how far it stands out. */
interface Examined {
  readonly key: ReadingKey;
  readonly reading: GivenReading;
  /** T = vᵀ Qᵥ⁺ v, and its degrees of freedom: 0 when the reading cannot be tested. */
  readonly statistic: number;
  readonly directions: number;
  /** Redundancy over rows. */
  readonly redundancy: number;
}

interface Doubted extends Examined {
  /** Statistic over its critical value. */
  readonly share: number;
}

/**
 * Sets suspects aside: they are withdrawn from the adjustment, which is left solved without them. `putBack` undoes it.
 * @throws {ArgumentError} the estimate holds measurements that the adjustment does not know, or robust weights are in use, which take the place
 *   of these tests.  @throws {LevelError}
 * Cost: for each round a solve, a factor and a selected inverse, and a path for each state that a reading of several rows is on.
 */
export function screenReadings(network: Network, options: ScreeningOptions = {}): Screening {
  const { adjustment } = network;
  const { level = 0.05, power = 0.8, onRound } = options;
  requireLevel("level", level);
  adjustment.solve();
  let examined = examine(network);
  const control = controlOf(examined);
  const tests = examined.filter(({ directions }) => directions > 0).length;
  const testLevel = tests > 0 ? perTestLevel(level, tests) : level;
  const { mostSuspects = Math.max(10, Math.floor(examined.length / 100)) } = options;
  const atFirst = doubtedAmong(examined, testLevel).length;
  const setAside: { reading: GivenReading; confusable: Suspect["confusable"] }[] = [];
  for (;;) {
    const doubted = doubtedAmong(examined, testLevel);
    if (doubted.length === 0) break;
    onRound?.(setAside.length);
    const worst = worstOfNeighbourhoods(doubted);
    if (setAside.length + worst.length > mostSuspects) {
      putBack(network, setAside);
      return { suspects: [], level, testLevel, tests, overwhelmed: atFirst, control };
    }
    const picked = worst.map((one) => ({ ...one, confusable: rivals(network, one, doubted) }));
    setAside.push(...withdrawTogether(network, picked));
    examined = examine(network);
  }
  takeBack(network, setAside, testLevel);
  const suspects = setAside.map(({ reading, confusable }) => suspectOf(network, reading, confusable, testLevel, power));
  suspects.sort((a, b) => standing(b) - standing(a));
  return { suspects, level, testLevel, tests, overwhelmed: undefined, control };
}

/** Lets suspects count again. */
export function putBack({ adjustment }: Network, suspects: readonly { readonly reading: GivenReading }[]): void {
  if (suspects.length === 0) return;
  for (const { reading } of suspects) adjustment.addReading(reading as Parameters<typeof adjustment.addReading>[0]);
  adjustment.solve();
}

/** Statistic over threshold, both as χ². */
function standing({ verdict }: Suspect): number {
  const ratio = verdict.statistic / verdict.threshold;
  return verdict.distribution === "normal" ? ratio * ratio : ratio;
}

function examine({ adjustment, estimate }: Network): Examined[] {
  const readings = [...adjustment.readings()];
  const redundancies = estimate.redundancies();
  if (redundancies.length !== readings.length)
    throw new ArgumentError(
      "estimate",
      `an estimate of ${redundancies.length} measurements`,
      `its adjustment has ${readings.length} readings: give both of one network.`,
    );
  if (readings.some(({ weight }) => weight !== 1))
    throw new ArgumentError("adjustment", "one with robust weights", "tests of single readings need plain least squares.");
  const wide = readings.filter(({ residual }) => residual.length > 1);
  const evaluations = wide.length > 0 ? estimate.evaluate(wide.map(({ reading }) => adjustment.linearize(reading))) : [];
  let next = 0;
  return readings.map(({ key, reading, residual }, k) => {
    const m = residual.length;
    const redundancy = redundancies[k]! / m;
    const noise = noiseCovariance(reading);
    if (m === 1) {
      const directions = redundancy > leastRedundancy ? 1 : 0;
      return { key, reading, statistic: directions && residual[0]! ** 2 / (noise[0]! * redundancy), directions, redundancy };
    }
    // S = R + J Σ Jᵀ, so Qᵥ = R − J Σ Jᵀ = 2 R − S
    const { innovationCovariance } = evaluations[next++]!;
    const space = residualSpace(noise, twiceMinus(noise, innovationCovariance, m), m);
    const w = standardizedResidual(space, residual);
    return { key, reading, statistic: sumOfSquares(w), directions: w.length, redundancy };
  });
}

/** 2 R − S, made symmetric: where it is nearly nothing, rounding of R and S is all there is. */
function twiceMinus(noise: Float64Array, s: Float64Array, m: number): Float64Array {
  return noise.map((entry, at) => {
    const mirrored = (at % m) * m + Math.floor(at / m);
    return entry + noise[mirrored]! - (s[at]! + s[mirrored]!) / 2;
  });
}

/** Those whose test turns, the one that stands out most first. */
function doubtedAmong(examined: readonly Examined[], level: number): Doubted[] {
  const critical: number[] = [];
  const criticalOf = (q: number) => (critical[q] ??= chiSquare(q).isf(level));
  return examined
    .flatMap((one) => (one.directions > 0 ? [{ ...one, share: one.statistic / criticalOf(one.directions) }] : []))
    .filter(({ share }) => share > 1)
    .sort((a, b) => b.share - a.share);
}

function controlOf(examined: readonly Examined[]): Control {
  const grades = { "well controlled": 0, "fairly controlled": 0, "weakly controlled": 0, uncontrolled: 0 };
  for (const { redundancy } of examined) grades[gradeOf(redundancy)] += 1;
  const least = [...examined]
    .sort((a, b) => a.redundancy - b.redundancy)
    .slice(0, leastShown)
    .map(({ reading, redundancy }) => ({ reading, redundancy: Math.max(0, redundancy) }));
  return { grades, least };
}

/** Of suspects on common states only the worst: the others may stand out because of it. @param doubted worst first. */
function worstOfNeighbourhoods(doubted: readonly Doubted[]): Doubted[] {
  const taken = new Set<string>();
  return doubted.filter(({ reading: { states } }) => {
    const first = !states.some((state) => taken.has(state));
    for (const state of states) taken.add(state); // also around those passed over: their turn comes in the next round
    return first;
  });
}

/** @returns those that could go; when together they would leave a state open, the worst one alone. */
function withdrawTogether<One extends Doubted>({ adjustment }: Network, picked: readonly One[]): readonly One[] {
  for (const { key } of picked) adjustment.withdraw(key);
  try {
    adjustment.solve();
    return picked;
  } catch (error) {
    if (!(error instanceof UndeterminedError) || picked.length < 2) throw error;
    for (const { reading } of picked.slice(1)) adjustment.addReading(reading as Parameters<typeof adjustment.addReading>[0]);
    adjustment.solve();
    return picked.slice(0, 1);
  }
}

/** What stands out nearly as far as `one` and in the same way. */
function rivals(network: Network, one: Doubted, doubted: readonly Doubted[]): Suspect["confusable"] {
  // A test correlated by ρ with one that stands out by w stands out by ρ w itself.
  const near = doubted.filter((other) => other !== one && other.share > (0.8 * confusableFrom) ** 2 * one.share).slice(0, mostRivals);
  return near
    .map((other) => ({ reading: other.reading, correlation: correlationOf(network, one.reading, other.reading) }))
    .filter(({ correlation }) => correlation > confusableFrom)
    .sort((a, b) => b.correlation - a.correlation);
}

/** Correlation of the tests of two readings in force: their covariances from both evaluated as one. */
function correlationOf({ adjustment, estimate }: Network, first: GivenReading, second: GivenReading): number {
  const [a, b] = [adjustment.linearize(first), adjustment.linearize(second)];
  const [m, n] = [a.residual.length, b.residual.length];
  const all = m + n;
  const [ra, rb] = [noiseCovariance(first), noiseCovariance(second)];
  const covariance = new Float64Array(all * all);
  for (let i = 0; i < m; ++i) for (let j = 0; j < m; ++j) covariance[i * all + j] = ra[i * m + j]!;
  for (let i = 0; i < n; ++i) for (let j = 0; j < n; ++j) covariance[(m + i) * all + m + j] = rb[i * n + j]!;
  const placed = (jacobian: Float64Array, from: number) => {
    const out = new Float64Array((all * jacobian.length) / (from === 0 ? m : n));
    out.set(jacobian, (from * out.length) / all);
    return out;
  };
  const { innovationCovariance: s } = estimate.evaluate({
    states: [...a.states, ...b.states],
    jacobians: [...a.jacobians.map((jacobian) => placed(jacobian, 0)), ...b.jacobians.map((jacobian) => placed(jacobian, m))],
    residual: [...a.residual, ...b.residual],
    covariance,
  });
  // Qᵥ = 2 R − S, blockwise
  const block = (rows: number, columns: number, i0: number, j0: number) =>
    Float64Array.from({ length: rows * columns }, (_, at) => {
      const entry = (i0 + Math.floor(at / columns)) * all + j0 + (at % columns);
      return 2 * covariance[entry]! - s[entry]!;
    });
  return suspectCorrelation({ first: block(m, m, 0, 0), second: block(n, n, m, m), between: block(m, n, 0, m), dimensions: [m, n] })
    .correlation;
}

/** Readings set aside that fit what is left count again, the last ones first. */
function takeBack(network: Network, setAside: { reading: GivenReading }[], level: number): void {
  const { adjustment, estimate } = network;
  for (let k = setAside.length - 1; k >= 0; --k) {
    const { reading } = setAside[k]!;
    const candidate = adjustment.linearize(reading);
    const { mahalanobisSquared } = estimate.evaluate(candidate);
    if (mahalanobisSquared > chiSquare(candidate.residual.length).isf(level)) continue;
    putBack(network, setAside.splice(k, 1));
  }
}

/** The reading against the others: ν of covariance S is to them what its residual v = R S⁻¹ ν of covariance R S⁻¹ R is with it taken in. */
function suspectOf(
  { adjustment, estimate }: Network,
  reading: GivenReading,
  confusable: Suspect["confusable"],
  level: number,
  power: number,
): Suspect {
  const { innovation, innovationCovariance: s } = estimate.evaluate(adjustment.linearize(reading));
  const m = innovation.length;
  const noise = noiseCovariance(reading);
  const residual = product(noise, solveSymmetric("innovationCovariance", s, m, innovation), m, m, 1);
  const residualCovariance = product(noise, solveSymmetric("innovationCovariance", s, m, noise, m), m, m, m);
  return {
    reading,
    discrepancy: innovation,
    standardDeviations: Float64Array.from({ length: m }, (_, k) => Math.sqrt(s[k * (m + 1)]!)),
    verdict: residualTest({ residual, noiseCovariance: noise, residualCovariance }, { level }),
    reliability: reliability({ dimension: m, noiseCovariance: noise, residualCovariance }, { level, power }),
    confusable,
  };
}
