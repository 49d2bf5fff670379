import { beforeAll, describe, expect, test } from "vitest";
import { type Information, information } from "../../bench/families/information.js";
import type { Stream } from "../../bench/families/stream.js";
import { families } from "../../bench/families.js";
import { type CommitReport, Estimate, factorize, type MeasurementId, memoryUsage, type StateId, SymmetricMatrix } from "../../src/index.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

/** Feeds a stream step by step; `after` sees the estimate after each commit. */
function feed(
  stream: Stream,
  estimate: Estimate,
  after: (step: number, report: CommitReport, ids: StateId[], measurements: MeasurementId[]) => void,
): void {
  const ids: StateId[] = [];
  const measurements: MeasurementId[] = [];
  for (let s = 0; s < stream.steps; s += 1) {
    const { firstState, lastState, firstMeasurement, lastMeasurement } = stream.step(s);
    for (let i = firstState; i < lastState; i += 1) ids.push(estimate.addState(stream.dimension(i)));
    for (let k = firstMeasurement; k < lastMeasurement; k += 1) measurements.push(estimate.addMeasurement(input(stream, k, ids)));
    after(s, estimate.commit(), ids, measurements);
  }
}

function input(stream: Stream, k: number, ids: readonly StateId[]) {
  const { states, jacobians, residual, standardDeviations } = stream.measurement(k);
  return { states: states.map((i) => ids[i]!), jacobians, residual, standardDeviations };
}

/** Largest relative difference of kept blocks (by their diagonals), newest column and solution from a fresh factor of the whole. */
function compare(estimate: Estimate, { order, columnPointers, rowIndices, values, blockSizes, vector }: Information, newest: StateId) {
  const factor = factorize(SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }), { blockSizes });
  const diagonal = factor.inverseDiagonal();
  const blocks = estimate.marginals();
  let worst = 0;
  let at = 0;
  let unknown = 0;
  for (const d of blockSizes) {
    for (let j = 0; j < d; j += 1) worst = Math.max(worst, Math.abs(blocks[at + j * (d + 1)]! / diagonal[unknown + j]! - 1));
    at += d * d;
    unknown += d;
  }
  const across = blockSizes.at(-1)!;
  const column = estimate.blockColumn(newest);
  const truth = factor.inverseColumns(Array.from({ length: across }, (_, j) => order - across + j));
  const scale = truth.reduce((most, v) => Math.max(most, Math.abs(v)), 0);
  for (const [k, v] of truth.entries()) worst = Math.max(worst, Math.abs(column[k]! - v) / scale);
  const x = estimate.solution();
  const solved = factor.solve(vector);
  const size = solved.reduce((most, v) => Math.max(most, Math.abs(v)), 0);
  for (const [k, v] of solved.entries()) worst = Math.max(worst, Math.abs(x[k]! - v) / size);
  factor.dispose();
  return worst;
}

/** Both sides carry rounding errors of about ε times the scaled condition, which is below 1e5 for these streams; 1e-9 is 20 times that. */
const TOLERANCE = 1e-9;

describe.each([
  ["heavy", 160],
  ["net", 160],
  ["chain", 160],
  ["heavySpatial", 60],
] as const)("a stream of the %s family, %i states", (family, size) => {
  test("keeps every block, the newest column and the solution at each step, by ledger and by new bases", () => {
    const used = memoryUsage().used;
    const stream = families[family].make(size);
    const estimate = new Estimate({ track: "all" });
    estimate.track("all", { column: "newest" });
    const routes = new Set<string>();
    feed(stream, estimate, (s, report, ids) => {
      routes.add(report.route);
      if (s % 3 !== 0) return; // between two readings the changes of up to three commits are owed
      expect(compare(estimate, information(stream, s + 1), ids.at(-1)!)).toBeLessThan(TOLERANCE);
    });
    expect(routes).toEqual(new Set(["rebase", "ledger"]));
    estimate.dispose();
    expect(memoryUsage().used).toBe(used);
  });

  test("answers the same whether marginals are kept or not, and with bases built in slices", () => {
    const stream = families[family].make(10 * size);
    const [lazy, sliced] = [new Estimate(), new Estimate({ track: "all", latencyBudget: 0.05 })];
    let inSlices = 0;
    feed(stream, lazy, () => {});
    feed(stream, sliced, (s, report) => {
      if (report.because.includes("in slices")) inSlices += 1;
      if (s % 40 === 0) sliced.marginals();
    });
    if (family !== "chain") expect(inSlices).toBeGreaterThan(0); // a chain's leaves cost next to nothing to carry
    const [a, b] = [lazy.marginals(), sliced.marginals()];
    for (const [k, v] of a.entries())
      expect(Math.abs(b[k]! - v)).toBeLessThan(TOLERANCE * a.reduce((most, w) => Math.max(most, Math.abs(w)), 0));
    lazy.dispose();
    sliced.dispose();
  });

  test("comes back to where it was after withdrawing measurements and adding them again", () => {
    const stream = families[family].make(Math.ceil(size / 2));
    const estimate = new Estimate({ track: "all" });
    estimate.track("all", { column: "newest" });
    let ids: StateId[] = [];
    let measurements: MeasurementId[] = [];
    feed(stream, estimate, (_s, _report, allIds, allMeasurements) => {
      ids = allIds;
      measurements = allMeasurements;
    });
    const whole = information(stream);
    expect(compare(estimate, whole, ids.at(-1)!)).toBeLessThan(TOLERANCE);
    // Those whose rows others control fully: taking one out leaves everything determined.
    const redundancies = estimate.redundancies();
    const { degreesOfFreedom } = estimate.varianceFactor();
    expect(redundancies.reduce((sum, r) => sum + r, 0)).toBeCloseTo(degreesOfFreedom, 8);
    const rowsOf = (k: number) => stream.measurement(k).residual.length;
    const redundant = [...redundancies.keys()].filter((k) => redundancies[k]! > 0.3 * rowsOf(k)).slice(-5);
    // A chain's position fixes are so weak beside its steps that nothing but the whole controls them.
    expect(redundant.length).toBe(family === "chain" ? 0 : 5);
    for (const k of redundant) expect(estimate.redundancy(measurements[k]!)).toBeCloseTo(redundancies[k]!, 9);
    for (const k of redundant) {
      estimate.withdraw(measurements[k]!);
      estimate.commit();
      estimate.marginals();
    }
    for (const k of redundant) estimate.addMeasurement(input(stream, k, ids));
    estimate.commit();
    expect(compare(estimate, whole, ids.at(-1)!)).toBeLessThan(TOLERANCE);
    estimate.dispose();
  });
});

test("a solution read before the marginals is read again after them, though they have brought in a new base", () => {
  const stream = families.net.make(160);
  const estimate = new Estimate({ track: "all" });
  let newBases = 0;
  feed(stream, estimate, (s) => {
    if (s % 60 !== 59) return; // so much is owed then that all afresh is cheaper
    const before = estimate.solution();
    const { ledgerBytes } = estimate.statistics;
    estimate.marginals();
    if (ledgerBytes > 0 && estimate.statistics.ledgerBytes === 0) newBases += 1;
    const after = estimate.solution();
    const size = before.reduce((most, v) => Math.max(most, Math.abs(v)), 0);
    for (const [k, v] of before.entries()) expect(Math.abs(after[k]! - v)).toBeLessThan(TOLERANCE * size);
  });
  expect(newBases).toBeGreaterThan(0);
  estimate.dispose();
});
