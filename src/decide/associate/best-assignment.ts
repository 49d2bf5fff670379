// Each sighting with its own nearest target, the whole chosen at once, errors of different pairings taken as independent.
// Source: global nearest neighbour; S. Blackman, R. Popoli, "Design and Analysis of Modern Tracking Systems" (1999), 6.4.
import { chiSquare } from "../distributions.js";
import { ArgumentError } from "../errors.js";
import { choleskyOf, forwardSolve, type Matrix, sumOfSquares, symmetricMatrix, vector } from "../small-matrix.js";
import { inWords, percent, upperTest } from "../verdict.js";
import { cheapestAssignment } from "./assignment.js";
import { type Association, bySighting, type Pairing } from "./candidates.js";

/**
 * The assignment with most matches within the gate and, among those, the smallest Σ (d² + ln det S), the likelihood of all matches.
 * @param pairings candidates with ν (all of one length m) and S, m × m.  @param sightings their number.
 * @param options `level` of the gate, 0.01 unless given.
 * @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError}  Cost O(pairings · m³ + sightings² · (targets + sightings)).
 */
export function bestAssignment(
  pairings: readonly (Pairing & { readonly covariance: Matrix })[],
  sightings: number,
  { level = 0.01 }: { level?: number } = {},
): Association {
  const m = pairings[0]?.innovation.length ?? 1;
  const gate = chiSquare(m).isf(level);
  const squares = new Float64Array(pairings.length);
  const surprise = pairings.map(({ innovation, covariance }, k) => {
    const nu = vector(`pairings[${k}].innovation`, innovation, m);
    const factor = choleskyOf(`pairings[${k}].covariance`, symmetricMatrix(`pairings[${k}].covariance`, covariance, m), m);
    squares[k] = sumOfSquares(forwardSolve(factor, m, nu));
    let logDeterminant = 0;
    for (let i = 0; i < m; ++i) logDeterminant += 2 * Math.log(factor[i * m + i]!);
    return squares[k]! + logDeterminant;
  });
  const lists = bySighting(pairings, sightings, (k) => surprise[k]!);
  const targets = [...new Set(pairings.map(({ target }) => target))].sort((a, b) => a - b);
  const place = new Map(targets.map((target, column) => [target, column]));
  const inside = pairings.map((_, k) => k).filter((k) => squares[k]! <= gate);
  // Going without a target costs more than any whole set of matches can differ by, so that matches are made before they are improved.
  const least = inside.reduce((least, k) => Math.min(least, surprise[k]!), Infinity);
  const range = inside.reduce((range, k) => Math.max(range, surprise[k]! - least), 0);
  const none = (range + 1) * (sightings + 1);
  const columns = targets.length + sightings;
  const costs = new Float64Array(sightings * columns).fill(Infinity);
  const chosenBy = new Map<number, number>(); // cell → pairing
  for (const [row, list] of lists.entries()) {
    costs[row * columns + targets.length + row] = none;
    for (const k of list) {
      const cell = row * columns + place.get(pairings[k]!.target)!;
      if (squares[k]! > gate) continue;
      if (chosenBy.has(cell))
        throw new ArgumentError(
          `pairings[${k}]`,
          `sighting ${row} with target ${pairings[k]!.target}`,
          "it is there twice: give each pair once.",
        );
      costs[cell] = surprise[k]! - least;
      chosenBy.set(cell, k);
    }
  }
  const { columnOf } = cheapestAssignment(costs, sightings, columns);
  const accepted = [...columnOf].flatMap((column, row) => chosenBy.get(row * columns + column) ?? []);
  const matched = new Set(accepted.map((k) => pairings[k]!.sighting));
  const total = accepted.reduce((sum, k) => sum + squares[k]!, 0);
  const test = upperTest(total, chiSquare(m * Math.max(1, accepted.length)), level);
  return {
    ...test,
    accepted,
    unmatched: lists.flatMap((_, sighting) => (matched.has(sighting) ? [] : [sighting])),
    work: inside.length,
    verdict: "settled",
    because: `${accepted.length} of ${sightings} sightings have a target of their own within the gate that refuses ${percent(level)} of right pairs; together they are off by d² = ${inWords(total)}, and no other choice matches more or fits better.`,
  };
}
