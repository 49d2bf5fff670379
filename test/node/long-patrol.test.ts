// Kept marginals over a long run: thousands of updates, catch-ups and new bases on one set of numbers.
import { beforeAll, expect, test } from "vitest";
import { families } from "../../bench/families.js";
import { Estimate, type MeasurementInput } from "../../src/index.js";
import { ExactSums } from "../support/exact-twin.js";
import { initFacade } from "../support/facade.js";
import { Refined } from "../support/refined.js";

beforeAll(initFacade);

/** Largest |found − true| ÷ √(true Σii Σjj) of a block of three: metres and radians alike. */
function scaledError(found: Float64Array, truth: Float64Array): number {
  let worst = 0;
  for (let k = 0; k < 9; k += 1)
    worst = Math.max(worst, Math.abs(found[k]! - truth[k]!) / Math.sqrt(truth[4 * Math.floor(k / 3)]! * truth[4 * (k % 3)]!));
  return worst;
}

const STEPS = 10_000;
/** Steps after which blocks are compared, and poses compared there: the first, two on the way, the one just added. */
const SAMPLED = [500, 2000, 4500, 7000, STEPS];

test(`over ${STEPS} steps of a heavy patrol the kept marginals stay within 1e-9 of a solution in double-double, and within their bound`, () => {
  const stream = families.heavy.make(STEPS);
  const estimate = new Estimate({ track: "all" });
  estimate.track("all", { column: "newest" });
  const measurements: MeasurementInput[] = [];
  const routes = { none: 0, ledger: 0, rebase: 0 };
  let compared = 0;
  for (let s = 0; s < stream.steps; s += 1) {
    const { firstState, lastState, firstMeasurement, lastMeasurement } = stream.step(s);
    for (let i = firstState; i < lastState; i += 1) estimate.addState(3);
    for (let k = firstMeasurement; k < lastMeasurement; k += 1) {
      measurements.push(stream.measurement(k));
      estimate.addMeasurement(measurements.at(-1)!);
    }
    const report = estimate.commit();
    routes[report.route] += 1;
    // Read at every step, as a caller who watches all of it does: each reading brings the kept numbers up to date.
    const blocks = estimate.marginals();
    if (!SAMPLED.includes(s + 1)) continue;

    const sums = new ExactSums(3 * lastState);
    for (const m of measurements)
      sums.measure(
        m,
        (state) => 3 * state,
        () => 3,
      );
    const refined = new Refined(sums);
    for (const state of [0, Math.floor(lastState / 3), Math.floor((2 * lastState) / 3), lastState - 1]) {
      const error = scaledError(blocks.subarray(9 * state, 9 * state + 9), refined.block(3 * state, 3));
      expect(error).toBeLessThan(1e-9);
      expect(error).toBeLessThanOrEqual(report.bound);
      compared += 1;
    }
    refined.dispose();
  }
  expect(compared).toBe(4 * SAMPLED.length);
  expect(routes.rebase).toBeGreaterThan(10);
  expect(routes.ledger).toBeGreaterThan(10 * routes.rebase);
  estimate.dispose();
});
