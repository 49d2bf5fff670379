// What needs Node: a collector that can be asked, and two gigabytes of untouched address space.
import { setFlagsFromString } from "node:v8";
import { runInNewContext } from "node:vm";
import { beforeAll, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { withLoan } from "../../bindings/memory.js";
import { factorize, memoryUsage } from "../../src/index.js";
import { initFacade, randomDominant } from "../support/facade.js";

beforeAll(initFacade);
const matrix = randomDominant(300, 3, random(8).uniform);

test("a factor that was never disposed is freed once it is collected", async () => {
  setFlagsFromString("--expose-gc");
  const collect = runInNewContext("gc") as () => void;
  const { used } = memoryUsage();
  const forget = () => {
    for (let k = 0; k < 20; k += 1) factorize(matrix);
  };
  forget();
  expect(memoryUsage().used).toBeGreaterThan(used);
  for (let tries = 0; tries < 100 && memoryUsage().used > used; tries += 1) {
    collect();
    await new Promise((resolve) => setTimeout(resolve, 10));
  }
  expect(memoryUsage().used).toBe(used);
});

test("everything works at addresses above 2 GiB, which reach JavaScript as negative numbers", () => {
  const answers = () => {
    const factor = factorize(matrix);
    const result = [
      factor.solve(new Float64Array(600).fill(1), 2),
      factor.inverseColumns([1, 200]),
      factor.inverseEntries([0, 5, 7], [299, 5, 1]),
      factor.inverseDiagonal(),
      factor.selectedInverse().values,
      factor.selectedInverse({ pattern: "matrix" }).values,
      Float64Array.of(factor.logDeterminant(), factor.reciprocalCondition()),
    ];
    factor.refactor(matrix);
    factor.dispose();
    return result;
  };
  const low = answers();
  withLoan("A test", (loan) => {
    loan.room(2 ** 31); // most of it stays untouched, so the system gives no page
    const high = withLoan("A test", (above) => {
      expect(above.room(1_000_000)).toBeGreaterThan(2 ** 31);
      return answers();
    });
    expect(high).toEqual(low);
  });
});
