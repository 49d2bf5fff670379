import { expect, test } from "vitest";
import { chiSquare, noncentralChiSquare } from "../../src/decide/distributions.js";
import { ArgumentError, LevelError } from "../../src/decide/errors.js";
import { noncentrality } from "../../src/decide/noncentrality.js";

// δ₀ as quoted in textbooks after Baarda (1968), two decimals; λ₀ by the definition with 40 digits
test.each([
  [0.001, 0.8, 4.13, 17.074646805187548],
  [0.01, 0.8, 3.42, 11.67896814857075],
  [0.001, 0.9, 4.57, 20.90389995423204],
  [0.01, 0.9, 3.86, 14.879387166502477],
  [0.001, 0.95, 4.94, 24.357979282508573],
  [0.05, 0.95, 3.6, 12.994709094690245],
  [0.0027, 0.8, 3.84, 14.757876932021791],
])("one dimension: level %d, power %d", (level, power, quoted, lambda) => {
  expect(Math.abs(Math.sqrt(noncentrality(1, level, power)) - quoted)).toBeLessThanOrEqual(0.0051); // 4.935 is quoted as 4.94
  expect(Math.abs(noncentrality(1, level, power) / lambda - 1)).toBeLessThanOrEqual(1e-12);
});

test("Baarda's 17.07 at level 0.001 and power 0.80", () => expect(noncentrality(1, 0.001, 0.8)).toBeCloseTo(17.07, 2));

// the same definition with 16 digits; de Jong, Teunissen (2000) use it for several dimensions
test.each([
  [2, 0.001, 0.8, 19.66238560932999],
  [10, 0.05, 0.8, 16.24111028494418],
  [3, 0.05, 0.9, 14.17148730446825],
  [6, 0.01, 0.8, 18.87185177518882],
])("%d dimensions: level %d, power %d", (q, level, power, lambda) => {
  expect(Math.abs(noncentrality(q, level, power) / lambda - 1)).toBeLessThanOrEqual(1e-12);
});

test("the definition holds over levels, powers and dimensions", () => {
  for (const q of [1, 2, 5, 40, 300])
    for (const level of [1e-6, 0.001, 0.05, 0.4])
      for (const power of [level * 1.01, 0.5, 0.8, 0.999].filter((p) => p > level)) {
        const reached = noncentralChiSquare(q, noncentrality(q, level, power)).sf(chiSquare(q).isf(level));
        // the critical value is good to 1e−13 of itself, which moves the power by up to 1e−11
        expect(Math.abs(reached - power), `${q} ${level} ${power}`).toBeLessThanOrEqual(1e-11);
      }
});

test("a power no test can have is named", () => {
  expect(() => noncentrality(1, 0.05, 0.05)).toThrow(ArgumentError);
  expect(() => noncentrality(1, 0.05, 1)).toThrow("power = 1");
  expect(() => noncentrality(1, 5, 0.8)).toThrow(LevelError);
});
