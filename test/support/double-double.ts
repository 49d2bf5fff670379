// Arithmetic on pairs hi + lo of doubles, about 32 digits: error-free transformations of Knuth (TAOCP vol. 2, 4.2.2, two-sum) and
// Dekker ("A floating-point technique for extending the available precision", Numer. Math. 18, 1971: split, two-product, and the pair
// operations). The reference that tests hold double results against.

/** hi is the double nearest to the value, lo what is left. */
export type DoubleDouble = readonly [hi: number, lo: number];

export const zero: DoubleDouble = [0, 0];

/** 2²⁷ + 1: cuts a 53-bit number into two of 26 bits. Exact for |x| below 2⁹⁹⁶. */
const splitter = 134217729;

/** a + b exactly. */
export function twoSum(a: number, b: number): DoubleDouble {
  const sum = a + b;
  const of = sum - a;
  return [sum, a - (sum - of) + (b - of)];
}

/** a · b exactly, unless it underflows. */
export function twoProduct(a: number, b: number): DoubleDouble {
  const product = a * b;
  const [ca, cb] = [splitter * a, splitter * b];
  const [ah, bh] = [ca - (ca - a), cb - (cb - b)];
  const [al, bl] = [a - ah, b - bh];
  return [product, al * bl - (product - ah * bh - al * bh - ah * bl)];
}

const renormalized = (hi: number, lo: number): DoubleDouble => {
  const sum = hi + lo;
  return [sum, lo - (sum - hi)];
};

export function add(a: DoubleDouble, b: DoubleDouble): DoubleDouble {
  const [hi, error] = twoSum(a[0], b[0]);
  const [lo, rest] = twoSum(a[1], b[1]);
  const [sum, left] = renormalized(hi, error + lo);
  return renormalized(sum, left + rest);
}

const negate = (a: DoubleDouble): DoubleDouble => [-a[0], -a[1]];
export const subtract = (a: DoubleDouble, b: DoubleDouble): DoubleDouble => add(a, negate(b));

export function multiply(a: DoubleDouble, b: DoubleDouble): DoubleDouble {
  const [hi, lo] = twoProduct(a[0], b[0]);
  return renormalized(hi, lo + (a[0] * b[1] + a[1] * b[0]));
}

/** Three steps of long division: a quotient digit of 53 bits each. */
export function divide(a: DoubleDouble, b: DoubleDouble): DoubleDouble {
  const first = a[0] / b[0];
  let rest = subtract(a, multiply(b, [first, 0]));
  const second = rest[0] / b[0];
  rest = subtract(rest, multiply(b, [second, 0]));
  return add(renormalized(first, second), [rest[0] / b[0], 0]);
}

/** One Newton step on the double's root: √a ≈ x + (a − x²) / 2x. */
export function squareRoot(a: DoubleDouble): DoubleDouble {
  if (a[0] === 0) return zero;
  const x = Math.sqrt(a[0]);
  const rest = subtract(a, twoProduct(x, x));
  return add([x, 0], divide(rest, [2 * x, 0]));
}
