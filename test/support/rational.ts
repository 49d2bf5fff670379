// Exact fractions on BigInt, and exact linear algebra of small matrices by fraction-free elimination
// (Bareiss, "Sylvester's identity and multistep integer-preserving Gaussian elimination", Math. Comp. 22, 1968).

export class Rational {
  private constructor(
    /** Carries the sign. */
    readonly numerator: bigint,
    /** Positive, no common factor with the numerator. */
    readonly denominator: bigint,
  ) {}

  static of(numerator: bigint | number, denominator: bigint | number = 1n): Rational {
    let [p, q] = [BigInt(numerator), BigInt(denominator)];
    if (q === 0n) throw new Error("a fraction with denominator 0");
    if (q < 0n) [p, q] = [-p, -q];
    const common = greatestCommonDivisor(p < 0n ? -p : p, q);
    return new Rational(p / common, q / common);
  }

  /** The exact value of a double. */
  static fromNumber(value: number): Rational {
    if (!Number.isFinite(value)) throw new Error(`${value} is not a fraction`);
    let denominator = 1n;
    while (!Number.isInteger(value)) {
      value *= 2;
      denominator *= 2n;
    }
    return Rational.of(BigInt(value), denominator);
  }

  /** The exact value of a decimal text such as "-12.5e-3". */
  static fromDecimal(text: string): Rational {
    const parts = /^([+-]?)(\d*)\.?(\d*)(?:e([+-]?\d+))?$/i.exec(text);
    if (!parts || `${parts[2]}${parts[3]}` === "") throw new Error(`"${text}" is not a decimal number`);
    const [, sign, whole = "", part = "", exponent = "0"] = parts;
    const digits = BigInt(`${whole}${part}`) * (sign === "-" ? -1n : 1n);
    const scale = Number(exponent) - part.length;
    return scale < 0 ? Rational.of(digits, 10n ** BigInt(-scale)) : Rational.of(digits * 10n ** BigInt(scale));
  }

  plus(b: Rational): Rational {
    return Rational.of(this.numerator * b.denominator + b.numerator * this.denominator, this.denominator * b.denominator);
  }
  minus(b: Rational): Rational {
    return this.plus(Rational.of(-b.numerator, b.denominator));
  }
  times(b: Rational): Rational {
    return Rational.of(this.numerator * b.numerator, this.denominator * b.denominator);
  }
  over(b: Rational): Rational {
    return Rational.of(this.numerator * b.denominator, this.denominator * b.numerator);
  }
  equals(b: Rational): boolean {
    return this.numerator === b.numerator && this.denominator === b.denominator;
  }

  /** To within one unit in the last place of a double. */
  toNumber(): number {
    const negative = this.numerator < 0n;
    const p = negative ? -this.numerator : this.numerator;
    if (p === 0n) return 0;
    // Shift so that the integer quotient has 64 bits or a few more, more than a double holds.
    const shift = 64 - (p.toString(2).length - this.denominator.toString(2).length);
    const quotient = shift > 0 ? (p << BigInt(shift)) / this.denominator : p / (this.denominator << BigInt(-shift));
    // Two factors, so that neither power of two leaves the range of a double before the product does.
    const value = Number(quotient) * 2 ** (-shift >> 1) * 2 ** (-shift - (-shift >> 1));
    return negative ? -value : value;
  }
}

function greatestCommonDivisor(a: bigint, b: bigint): bigint {
  let [x, y] = [a, b];
  while (y !== 0n) [x, y] = [y, x % y];
  return x;
}

/** X with A X = B, and det A. A is n × n, B n × m, rows of fractions; A must not be singular. */
function eliminate(
  a: readonly (readonly Rational[])[],
  b: readonly (readonly Rational[])[],
): { solution: Rational[][]; determinant: Rational } {
  const n = a.length;
  // Each row made integer by the product of its denominators' least common multiple.
  let scale = 1n;
  const rows = a.map((row, i) => {
    const all = [...row, ...b[i]!];
    const common = all.reduce((l, v) => (l / greatestCommonDivisor(l, v.denominator)) * v.denominator, 1n);
    scale *= common;
    return all.map((v) => (v.numerator * common) / v.denominator);
  });
  let previous = 1n;
  let sign = 1n;
  for (let k = 0; k < n; k += 1) {
    const pivotRow = rows.findIndex((row, i) => i >= k && row[k] !== 0n);
    if (pivotRow < 0) throw new Error("the matrix is singular");
    if (pivotRow !== k) {
      [rows[k], rows[pivotRow]] = [rows[pivotRow]!, rows[k]!];
      sign = -sign;
    }
    const pivot = rows[k]![k]!;
    for (const [i, row] of rows.entries()) {
      if (i === k) continue;
      const factor = row[k]!;
      for (let j = k + 1; j < row.length; j += 1) row[j] = (row[j]! * pivot - factor * rows[k]![j]!) / previous;
      // Full elimination: the rows done before are scaled along, so that every one ends with the same diagonal, the determinant.
      if (i < k) row[i] = pivot;
      row[k] = 0n;
    }
    previous = pivot;
  }
  const determinant = n === 0 ? 1n : previous;
  return {
    solution: rows.map((row) => row.slice(n).map((v) => Rational.of(v, determinant))),
    determinant: Rational.of(sign * determinant, scale),
  };
}

export const solveExactly = (a: readonly (readonly Rational[])[], b: readonly Rational[]): Rational[] =>
  eliminate(
    a,
    b.map((v) => [v]),
  ).solution.map((row) => row[0]!);

export const inverseExactly = (a: readonly (readonly Rational[])[]): Rational[][] =>
  eliminate(
    a,
    a.map((_, i) => a.map((__, j) => Rational.of(i === j ? 1 : 0))),
  ).solution;

export const determinantExactly = (a: readonly (readonly Rational[])[]): Rational =>
  eliminate(
    a,
    a.map(() => []),
  ).determinant;
