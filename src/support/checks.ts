// Checks at the border: what passes them cannot go wrong further down.
import { IndexRangeError, LengthError, NotFiniteError, OptionError } from "../errors.js";

export function requireLength(what: string, length: number, expected: number): void {
  if (length !== expected) throw new LengthError(`the length of ${what}`, length, expected);
}

export function requireIndex(what: string, value: number, lowest: number, highest: number): void {
  if (!(Number.isInteger(value) && value >= lowest && value <= highest)) throw new IndexRangeError(what, value, lowest, highest);
}

/** All elements are whole numbers in [lowest, highest]; gives them as a fresh Int32Array. */
export function indicesOf(what: string, values: ArrayLike<number>, lowest: number, highest: number): Int32Array {
  const result = new Int32Array(values.length);
  for (let k = 0; k < result.length; k += 1) {
    const value = values[k]!;
    result[k] = value;
    if (result[k] !== value || value < lowest || value > highest) throw new IndexRangeError(`${what}[${k}]`, value, lowest, highest);
  }
  return result;
}

/** All elements are finite; gives them as a fresh Float64Array. */
export function finiteNumbersOf(what: string, values: ArrayLike<number>, where?: (position: number) => string): Float64Array {
  const result = new Float64Array(values);
  for (let k = 0; k < result.length; k += 1) {
    if (!Number.isFinite(result[k]!)) throw new NotFiniteError(what, k, values[k]!, where?.(k));
  }
  return result;
}

/** The number of edits (letters put in, taken out or changed) from one word to another. Source: Wagner, Fischer, J. ACM 21 (1974). */
function edits(from: string, to: string): number {
  let row = Array.from({ length: to.length + 1 }, (_, k) => k);
  for (let i = 1; i <= from.length; i += 1) {
    const next = [i];
    for (let j = 1; j <= to.length; j += 1)
      next.push(Math.min(row[j]! + 1, next[j - 1]! + 1, row[j - 1]! + (from[i - 1] === to[j - 1] ? 0 : 1)));
    row = next;
  }
  return row[to.length]!;
}

function nearest(word: string, known: readonly string[]): string {
  return known.reduce((best, candidate) => (edits(word, candidate) < edits(word, best) ? candidate : best));
}

/** Every option has a known name. */
export function requireKnownOptions(of: string, options: object, known: readonly string[]): void {
  for (const name of Object.keys(options)) {
    if (!known.includes(name))
      throw new OptionError(`${of} has no option "${name}": did you mean "${nearest(name, known)}"?`, { option: name, known: [...known] });
  }
}

/** `value` is one of the words an option takes. */
export function requireWord(option: string, value: string, known: readonly string[]): void {
  if (!known.includes(value)) {
    const words = known.map((word) => `"${word}"`).join(", ");
    throw new OptionError(`${option} is "${value}": did you mean "${nearest(String(value), known)}"? It takes ${words}.`, {
      option,
      value,
      known: [...known],
    });
  }
}
