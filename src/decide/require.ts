// Checks at the border of the decisions: a value passes unchanged or its error names it.
import { ArgumentError, DegreesOfFreedomError, LevelError } from "./errors.js";

/** `value` if 0 < value < 1. @throws {LevelError} */
export function requireLevel(argument: string, value: number): number {
  if (!(value > 0 && value < 1)) throw new LevelError(argument, value);
  return value;
}

/** `value` if positive and finite; fractions are allowed (effective degrees of freedom). @throws {DegreesOfFreedomError} */
export function requireDegreesOfFreedom(argument: string, value: number): number {
  if (!(value > 0 && value < Infinity)) throw new DegreesOfFreedomError(argument, value);
  return value;
}

/** `value` if positive and finite. @throws {ArgumentError} */
export function requirePositive(argument: string, value: number): number {
  if (!(value > 0 && value < Infinity)) throw new ArgumentError(argument, value, "give a positive finite number.");
  return value;
}

/** `value` if finite and not negative. @throws {ArgumentError} */
export function requireNotNegative(argument: string, value: number): number {
  if (!(value >= 0 && value < Infinity)) throw new ArgumentError(argument, value, "give a finite number that is not negative.");
  return value;
}
