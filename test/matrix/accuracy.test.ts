// The largest relative error of the selected inverse is at most ten times that of a general library's dense Cholesky inverse of the same
// matrix, both held against double-double arithmetic.
import { beforeAll, expect, test } from "vitest";
import { chain } from "../../bench/families/chain.js";
import { information } from "../../bench/families/information.js";
import { type FamilyName, families } from "../../bench/families.js";
import { accuracyOf } from "../support/accuracy.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

/** States enough for supernodes of every width that the family has, few enough for a dense reference of at most some 200 unknowns. */
const states: Record<FamilyName, number> = {
  net: 90,
  patrol: 65,
  heavy: 65,
  heavySpatial: 30,
  helix: 34,
  landmarks: 70,
  chain: 65,
  grid: 200,
};
/** A dense error of no more than this is luck of a tiny case: one rounding of a result. */
const rounding = 2 ** -53;

test.each(Object.keys(states) as FamilyName[])("%s, three seeds and three orders", (name) => {
  for (const seed of [1, 2, 3]) {
    const matrix = information(families[name].make(states[name], seed));
    for (const ordering of ["automatic", "minimum-degree", "nested-dissection"] as const) {
      const { selected, dense } = accuracyOf(matrix, ordering);
      expect(selected).toBeLessThanOrEqual(10 * Math.max(dense, rounding));
    }
  }
});

test("a chain of 60 poses held at its first alone, condition about 1e10", () => {
  const { selected, dense } = accuracyOf(information(chain(60, { fixEvery: 0 })));
  expect(selected).toBeLessThanOrEqual(10 * Math.max(dense, rounding));
});
