// The largest set of pairings that agree with what is known all together, not only each alone.
// Source: J. Neira, J. D. Tardós, "Data association in stochastic mapping using the joint compatibility test", IEEE Trans. Robot. Autom. 17
// (2001) 890: depth-first branch and bound over the interpretation tree, the joint statistic grown by one block row a step.
import { chiSquare } from "../distributions.js";
import { ArgumentError, CovarianceError } from "../errors.js";
import { requireLevel } from "../require.js";
import { vector } from "../small-matrix.js";
import { inWords, percent, upperTest } from "../verdict.js";
import { type Association, bySighting, type Pairing } from "./candidates.js";

/** Hypotheses before the search gives up: about a second for 50 matches of two components each. */
const usualWorkLimit = 100_000;

/** Block S_ab of the joint innovation covariance, m_a × m_b row-major: J_a Σ J_bᵀ, and the noise where a = b or the noise is shared. */
export type InnovationCovariance = (a: number, b: number) => ArrayLike<number>;

/**
 * Most matches first, then the smallest joint d²; every partial choice must pass νᵀ S⁻¹ ν ≤ χ²(all its components), each pairing also alone.
 * @param pairings candidates, any number a sighting.  @param sightings their number.
 * @param covariance blocks of S by index into `pairings`; asked for again and again, so keep them ready.
 * @param options `level` of every test, 0.05 unless given; `workLimit` in hypotheses: when it is hit the verdict is "not settled" and the best
 * choice so far is returned.
 * @throws {LevelError}  @throws {ArgumentError}  @throws {CovarianceError} naming the pairing.
 * Cost a hypothesis O(c² m³) with c matches so far; their number is linear in the sightings when targets stand apart, exponential at worst.
 */
export function jointCompatibility(
  pairings: readonly Pairing[],
  sightings: number,
  covariance: InnovationCovariance,
  { level = 0.05, workLimit = usualWorkLimit }: { level?: number; workLimit?: number } = {},
): Association {
  requireLevel("level", level);
  if (!(workLimit >= 1)) throw new ArgumentError("workLimit", workLimit, "allow at least one hypothesis.");
  const thresholds: number[] = [];
  const thresholdOf = (degrees: number) => (thresholds[degrees] ??= chiSquare(degrees).isf(level));
  const alone = pairings.map((pairing, k) => {
    const joint = new JointStatistic(pairings, covariance);
    joint.push(k);
    return { squares: joint.squares, fits: joint.squares <= thresholdOf(pairing.innovation.length) };
  });
  const lists = bySighting(pairings, sightings, (k) => alone[k]!.squares).map((list) => list.filter((k) => alone[k]!.fits));
  // sightings with few candidates first: they branch least; those with none cannot match
  const sequence = lists.filter((list) => list.length > 0).sort((a, b) => a.length - b.length);

  const joint = new JointStatistic(pairings, covariance);
  const taken = new Set<number>();
  let best: { accepted: number[]; squares: number } = { accepted: [], squares: Infinity };
  let work = 0;
  let cut = false;
  const search = (depth: number): void => {
    const { matched, squares } = joint;
    if (matched.length > best.accepted.length || (matched.length === best.accepted.length && squares < best.squares))
      best = { accepted: [...matched], squares };
    for (const k of depth < sequence.length ? sequence[depth]! : []) {
      if (!worthwhile(depth)) return;
      if (work >= workLimit) {
        cut = true;
        return;
      }
      if (taken.has(pairings[k]!.target)) continue;
      work += 1;
      joint.push(k);
      if (joint.squares <= thresholdOf(joint.components)) {
        taken.add(pairings[k]!.target);
        search(depth + 1);
        taken.delete(pairings[k]!.target);
      }
      joint.pop();
    }
    if (depth < sequence.length && worthwhile(depth + 1)) search(depth + 1); // this sighting goes unmatched
  };
  /** Can a choice below still beat the best? Matches only add up, and so do their squares. */
  const worthwhile = (depth: number): boolean => {
    const most = joint.matched.length + sequence.length - depth;
    return most > best.accepted.length || (most === best.accepted.length && joint.squares < best.squares);
  };
  search(0);

  const accepted = best.accepted.sort((a, b) => pairings[a]!.sighting - pairings[b]!.sighting);
  const matched = new Set(accepted.map((k) => pairings[k]!.sighting));
  const unmatched = lists.flatMap((_, sighting) => (matched.has(sighting) ? [] : [sighting]));
  const refused = unmatched.filter((sighting) => lists[sighting]!.length > 0).length;
  const components = accepted.reduce((sum, k) => sum + pairings[k]!.innovation.length, 0);
  return {
    ...upperTest(accepted.length > 0 ? best.squares : 0, chiSquare(Math.max(1, components)), level),
    accepted,
    unmatched,
    work,
    verdict: cut ? "not settled" : "settled",
    because: cut
      ? `The search stopped at its limit of ${workLimit} hypotheses with ${accepted.length} of ${sightings} sightings matched; a better choice may exist. Raise workLimit, or sight the targets more precisely.`
      : `${accepted.length} of ${sightings} sightings agree with what is known all together (d² = ${inWords(accepted.length > 0 ? best.squares : 0)}, level ${percent(level)}); ${refused} more had a candidate that would pass alone but not beside the others.`,
  };
}

/** νᵀ S⁻¹ ν of a growing set of pairings, by the rows of the Cholesky factor of S and of L⁻¹ ν. */
class JointStatistic {
  readonly matched: number[] = [];
  /** Row r of L has r + 1 entries. */
  private readonly rows: Float64Array[] = [];
  private readonly solved: number[] = [];
  private readonly sums: number[] = [0];

  constructor(
    private readonly pairings: readonly Pairing[],
    private readonly covariance: InnovationCovariance,
  ) {}

  get squares(): number {
    return this.sums.at(-1)!;
  }

  get components(): number {
    return this.rows.length;
  }

  push(k: number): void {
    const nu = vector(`pairings[${k}].innovation`, this.pairings[k]!.innovation);
    const m = nu.length;
    const before = this.rows.length;
    const blocks = [...this.matched, k].map((other) => this.block(k, other, m));
    let squares = this.squares;
    for (let i = 0; i < m; ++i) {
      const row = new Float64Array(before + i + 1);
      let at = 0;
      for (const block of blocks) {
        const width = block.length / m;
        for (let j = 0; j < width && at < row.length; ++j) row[at++] = block[i * width + j]!;
      }
      const last = before + i;
      const diagonal = row[last]!;
      let value = nu[i]!;
      for (let j = 0; j <= last; ++j) {
        const other = j < last ? this.rows[j]! : row;
        let sum = row[j]!;
        for (let l = 0; l < j; ++l) sum -= row[l]! * other[l]!;
        if (j < last) {
          row[j] = sum / other[j]!;
          value -= row[j]! * this.solved[j]!;
        } else if (sum > row.length * Number.EPSILON * diagonal) row[j] = Math.sqrt(sum);
        else
          throw new CovarianceError("covariance", `is not positive definite once pairing ${k} joins ${this.matched.length} others.`, {
            pairing: k,
            others: [...this.matched],
          });
      }
      const y = value / row[last]!;
      this.rows.push(row);
      this.solved.push(y);
      squares += y * y;
    }
    this.matched.push(k);
    this.sums.push(squares);
  }

  pop(): void {
    const m = this.pairings[this.matched.pop()!]!.innovation.length;
    this.rows.length -= m;
    this.solved.length -= m;
    this.sums.pop();
  }

  private block(k: number, other: number, m: number): ArrayLike<number> {
    const block = this.covariance(k, other);
    const width = this.pairings[other]!.innovation.length;
    if (block.length !== m * width)
      throw new CovarianceError("covariance", `of pairings ${k} and ${other} has ${block.length} entries: give ${m} × ${width}.`, {
        pairings: [k, other],
      });
    return block;
  }
}
