import fc from "fast-check";
import { beforeAll, describe, expect, test } from "vitest";
import {
  Estimate,
  type MeasurementId,
  type MeasurementInput,
  memoryUsage,
  type StateId,
  UndeterminedError,
  UnknownMeasurementError,
} from "../../src/index.js";
import { ExactAnswers } from "../support/exact-twin.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

interface TwinState {
  readonly id: StateId;
  readonly dimension: number;
  forgotten: boolean;
}

/** What is in force, or will be after the next commit. Forgetting a state leaves all that is known of the others as it is, so here it only
 *  stops being asked for; but its measurements can no longer be touched. */
class Books {
  states: TwinState[] = [];
  measurements = new Map<MeasurementId, MeasurementInput>();

  copy(): Books {
    const other = new Books();
    other.states = this.states.map((state) => ({ ...state }));
    other.measurements = new Map(this.measurements);
    return other;
  }
  alive(): TwinState[] {
    return this.states.filter(({ forgotten }) => !forgotten);
  }
  dimensionOf(id: StateId): number {
    return this.states.find((state) => state.id === id)!.dimension;
  }
  touchable(): MeasurementId[] {
    const gone = new Set(this.states.filter(({ forgotten }) => forgotten).map(({ id }) => id));
    return [...this.measurements.keys()].filter((m) => !this.measurements.get(m)!.states.some((state) => gone.has(state)));
  }
  answers(): ExactAnswers {
    return new ExactAnswers(
      this.states.map(({ id, dimension }) => [id, dimension] as const),
      [...this.measurements.values()],
    );
  }
}

const command = fc.record({
  kind: fc.constantFrom("state", "measure", "measure", "withdraw", "replace", "forget", "commit", "commit"),
  /** What the command picks, and the numbers it makes up. */
  pick: fc.nat(1e6),
  dimension: fc.integer({ min: 1, max: 3 }),
  rows: fc.integer({ min: 1, max: 3 }),
  form: fc.constantFrom("standardDeviations", "covariance", "information"),
});
type Command = typeof command extends fc.Arbitrary<infer T> ? T : never;

/** Small whole numbers from a seed: exact in every arithmetic, so that what is singular is singular exactly. */
const digits = (seed: number) => {
  let state = (seed % 2147483646) + 1;
  return (bound: number): number => {
    state = (state * 48271) % 2147483647;
    return state % bound;
  };
};

function measurementOf({ pick, rows, form }: Command, states: readonly TwinState[]): MeasurementInput {
  const below = digits(pick);
  const chosen = Array.from({ length: 1 + below(3) }, () => states[below(states.length)]!); // the same one twice at times
  const matrix = (columns: number): number[][] => Array.from({ length: rows }, () => Array.from({ length: columns }, () => below(7) - 3));
  const noise =
    form === "standardDeviations"
      ? { standardDeviations: Array.from({ length: rows }, () => 2 ** (below(3) - 1)) }
      : { [form]: Array.from({ length: rows }, (_, i) => Array.from({ length: rows }, (__, j) => (i === j ? 3 : 1))) };
  return {
    states: chosen.map(({ id }) => id),
    jacobians: chosen.map(({ dimension }) => matrix(dimension)),
    residual: Array.from({ length: rows }, () => below(9) - 4),
    ...noise,
  };
}

const prior = ({ id, dimension }: TwinState): MeasurementInput => ({
  states: [id],
  jacobians: [Array.from({ length: dimension }, (_, i) => Array.from({ length: dimension }, (__, j) => (i === j ? 1 : 0)))],
  residual: new Array<number>(dimension).fill(1),
  standardDeviations: new Array<number>(dimension).fill(1),
});

/** Beyond this condition the whole numbers above have made a singular system: det Λ is a multiple of a power of 1/2, entries are below 1e3. */
const SINGULAR = 1e13;

/** An estimate and its books. */
class Pair {
  readonly estimate: Estimate;
  pending = new Books();
  committed = new Books();
  answers: ExactAnswers | undefined;
  /** Largest ‖Λ‖, ‖Σ‖ and entry of Σ that the estimate has come through: what is kept carries their rounding. */
  norm = 1;
  normOfInverse = 1;
  largest = 0;
  order = 1;

  constructor(track: "all" | "none") {
    this.estimate = new Estimate({ track });
    if (track === "all") this.estimate.track("all", { column: "newest" });
  }

  addState(dimension: number): void {
    const id = this.estimate.addState(dimension);
    this.pending.states.push({ id, dimension, forgotten: false });
  }
  add(measurement: MeasurementInput): void {
    this.pending.measurements.set(this.estimate.addMeasurement(measurement), measurement);
  }

  obey(command: Command): void {
    const { estimate, pending } = this;
    const below = digits(command.pick + 1);
    const alive = pending.alive();
    const touchable = pending.touchable();
    if (command.kind === "state") this.addState(command.dimension);
    else if (command.kind === "measure" && alive.length > 0) this.add(measurementOf(command, alive));
    else if (command.kind === "withdraw" && touchable.length > 0) {
      const id = touchable[below(touchable.length)]!;
      estimate.withdraw(id);
      pending.measurements.delete(id);
      expect(() => estimate.withdraw(id)).toThrow(UnknownMeasurementError);
    } else if (command.kind === "replace" && touchable.length > 0) {
      const id = touchable[below(touchable.length)]!;
      const old = pending.measurements.get(id)!;
      const jacobians = old.states.map((state) =>
        Array.from({ length: old.residual.length }, () => Array.from({ length: pending.dimensionOf(state) }, () => below(7) - 3)),
      );
      const residual = Array.from({ length: old.residual.length }, () => below(9) - 4);
      estimate.replace(id, { jacobians, residual });
      pending.measurements.set(id, { ...old, jacobians, residual });
    } else if (command.kind === "forget" && alive.length > 1) {
      const state = alive[below(alive.length)]!;
      estimate.forget([state.id]);
      state.forgotten = true;
    } else if (command.kind === "commit") this.commit();
  }

  /** Commits, and when that must fail sees that it does, that nothing has changed, and that priors mend it. */
  commit(): void {
    if (this.pending.states.length === 0) return;
    if (!this.tryCommit()) {
      for (const state of this.pending.alive()) this.add(prior(state));
      // A state that was forgotten before it was determined cannot be held any more; nothing then commits.
      if (!this.tryCommit()) this.stuck = true;
    }
  }
  stuck = false;

  /** The bound of the last report. */
  stated = 0;

  tryCommit(): boolean {
    const expected = singularOr(() => this.pending.answers());
    if (!expected) {
      expect(() => this.estimate.commit()).toThrow(UndeterminedError);
      this.compare();
      return false;
    }
    const report = this.estimate.commit();
    this.stated = report.bound;
    expect(report.measurements).toBe(this.pending.touchable().length);
    this.committed = this.pending.copy();
    this.answers = expected;
    this.norm = Math.max(this.norm, expected.norm);
    this.normOfInverse = Math.max(this.normOfInverse, expected.normOfInverse);
    this.largest = Math.max(this.largest, expected.largest);
    this.order = Math.max(this.order, expected.order);
    expect(report.states).toBe(this.committed.alive().length);
    this.compare();
    return true;
  }

  /** Every kind of answer against the twin's. */
  compare(): void {
    const { estimate, answers, committed } = this;
    if (!answers) return;
    const alive = committed.alive();
    if (alive.length === 0) return;
    // Backward errors of a factor and a dozen updates, each n ε of the largest Λ, seen through the largest Σ on both sides: ΔΣ = Σ ΔΛ Σ.
    // Or what the estimate itself says that its answers are good to: rows taken out of the ledger cost differences, which that bound counts.
    const relative = Math.max(64 * this.order * Number.EPSILON * this.norm * this.normOfInverse, this.stated);
    const bound = relative * this.largest;
    const near = (found: Float64Array, expected: Float64Array, scale = 1): void => {
      expect(found.length).toBe(expected.length);
      for (const [k, value] of expected.entries()) expect(Math.abs(found[k]! - value)).toBeLessThanOrEqual(bound * scale);
    };
    const blocks = alive.map(({ id }) => answers.block(id, id));
    near(estimate.marginals(), Float64Array.from(blocks.flatMap((block) => Array.from(block))));
    for (const [k, { id }] of alive.entries()) near(estimate.marginal(id), blocks[k]!);
    const [a, b] = [alive[0]!.id, alive.at(-1)!.id];
    near(estimate.crossCovariance(a, b), answers.block(a, b));
    const column = alive.flatMap(({ id }) => Array.from(answers.block(id, b)));
    const d = committed.dimensionOf(b);
    const rows = column.length / d;
    near(
      estimate.blockColumn(b),
      Float64Array.from({ length: column.length }, (_, k) => column[(k % rows) * d + Math.floor(k / rows)]!),
    );
    // Σ's error times what Jᵀ R⁻¹ r can be: entries to 3 × 4 over a variance of 1/4, of at most 30 measurements of 3 rows.
    const right = 3 * 4 * 4 * 90;
    near(estimate.solution(), Float64Array.from(alive.flatMap(({ id }) => Array.from(answers.solution(id)))), right);
    near(estimate.solution(a), answers.solution(a), right);
    const { weightedSquares, degreesOfFreedom } = estimate.varianceFactor();
    expect(Math.abs(weightedSquares - answers.weightedSquares)).toBeLessThanOrEqual(bound * right * right);
    const readings = [...committed.measurements.values()].reduce((sum, { residual }) => sum + residual.length, 0);
    expect(degreesOfFreedom).toBe(readings - answers.order);
    if (alive.length < committed.states.length) return;
    expect(Math.abs(estimate.logDeterminant() - answers.logDeterminant)).toBeLessThanOrEqual(this.order * relative);
  }
}

/** Undefined when Λ is singular. */
function singularOr(make: () => ExactAnswers): ExactAnswers | undefined {
  try {
    const answers = make();
    return answers.condition > SINGULAR ? undefined : answers;
  } catch {
    return undefined;
  }
}

describe.each(["all", "none"] as const)("any sequence of changes, track %s", (track) => {
  test("equals the same sums in double-double arithmetic after every commit; a commit that cannot be leaves everything as it was", () => {
    const used = memoryUsage().used;
    fc.assert(
      fc.property(fc.array(command, { minLength: 1, maxLength: 30 }), (commands) => {
        const pair = new Pair(track);
        try {
          pair.addState(2);
          pair.add(prior(pair.pending.states[0]!));
          for (const c of [...commands, { ...commands[0]!, kind: "commit" as const }]) {
            if (pair.stuck) break;
            pair.obey(c);
          }
        } finally {
          pair.estimate.dispose();
        }
        expect(memoryUsage().used).toBe(used);
      }),
      { numRuns: 150 },
    );
  });
});
