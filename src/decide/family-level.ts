// The level of each test when many are made and the whole family may raise one false alarm.
// Sources: Z. Šidák, J. Amer. Statist. Assoc. 62 (1967) 626; Bonferroni's inequality (Dunn 1961).
import { ArgumentError } from "./errors.js";
import { requireLevel } from "./require.js";

/**
 * Šidák 1 − (1 − α)^(1/n), exact for independent tests and safe for residuals of one adjustment; Bonferroni α / n, safe for any.
 * @param level α: the chance that any of the n tests raises a false alarm.  @param tests n, a whole number from 1.
 * @throws {LevelError}  @throws {ArgumentError} n is not a positive whole number.
 */
export function perTestLevel(level: number, tests: number, method: "sidak" | "bonferroni" = "sidak"): number {
  requireLevel("level", level);
  if (!(Number.isInteger(tests) && tests > 0)) throw new ArgumentError("tests", tests, "give the number of tests, a whole number from 1.");
  return method === "sidak" ? -Math.expm1(Math.log1p(-level) / tests) : level / tests;
}
