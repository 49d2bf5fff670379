import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { chiSquare, type Distribution, fisherF, noncentralChiSquare, normal, popeTau, studentT } from "../../src/decide/distributions.js";
import { ArgumentError, DegreesOfFreedomError, LevelError } from "../../src/decide/errors.js";

/** |value − reference| ≤ digits: relative, the promise of the module is 12 digits in either tail. */
const near = (value: number, reference: number, relative = 1e-12) =>
  expect(Math.abs(value - reference), `${value} against ${reference}`).toBeLessThanOrEqual(relative * Math.abs(reference));

describe("printed critical values", () => {
  // NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.4; printed with three decimals
  test.each([
    [1, 0.9, 2.706],
    [1, 0.95, 3.841],
    [1, 0.99, 6.635],
    [1, 0.999, 10.828],
    [2, 0.95, 5.991],
    [2, 0.975, 7.378],
    [2, 0.999, 13.816],
    [3, 0.9, 6.251],
    [3, 0.975, 9.348],
    [3, 0.99, 11.345],
    [5, 0.9, 9.236],
    [5, 0.95, 11.07],
    [5, 0.99, 15.086],
    [5, 0.999, 20.515],
    [10, 0.95, 18.307],
    [10, 0.975, 20.483],
    [10, 0.999, 29.588],
    [30, 0.9, 40.256],
  ])("chi-square, %d degrees of freedom, %d", (degrees, probability, printed) => {
    expect(Math.abs(chiSquare(degrees).quantile(probability) - printed)).toBeLessThanOrEqual(0.0005);
    near(chiSquare(degrees).isf(1 - probability), chiSquare(degrees).quantile(probability));
  });

  // e-Handbook 1.3.6.7.2
  test.each([
    [1, 0.95, 6.314],
    [1, 0.975, 12.706],
    [5, 0.95, 2.015],
    [5, 0.975, 2.571],
    [10, 0.95, 1.812],
    [10, 0.975, 2.228],
    [30, 0.95, 1.697],
    [30, 0.975, 2.042],
    [100, 0.95, 1.66],
    [100, 0.975, 1.984],
  ])("Student's t, %d degrees of freedom, %d", (degrees, probability, printed) => {
    expect(Math.abs(studentT(degrees).quantile(probability) - printed)).toBeLessThanOrEqual(0.0005);
  });

  // e-Handbook 1.3.6.7.3, 5 % level
  test.each([
    [1, 1, 161.448],
    [2, 10, 4.103],
    [10, 10, 2.978],
    [10, 30, 2.165],
    [3, 20, 3.098],
  ])("F, %d and %d degrees of freedom, upper 5 %%", (numerator, denominator, printed) => {
    expect(Math.abs(fisherF(numerator, denominator).isf(0.05) - printed)).toBeLessThanOrEqual(0.0005);
  });

  // e-Handbook 1.3.6.7.1 (normal), two-sided levels, three decimals
  test.each([
    [0.1, 1.645],
    [0.05, 1.96],
    [0.01, 2.576],
    [0.001, 3.291],
    [0.0001, 3.891],
  ])("normal, two-sided %d", (level, printed) => {
    expect(Math.abs(normal.isf(level / 2) - printed)).toBeLessThanOrEqual(0.0005);
  });

  // Thompson's tau at 5 %, printed for n = 3, 5, 10 readings of one quantity (from memory of ASME PTC 19.1): the largest deviation from the
  // mean over the sample deviation, so Pope's τ of n − 1 surplus readings times √(redundancy number) = √((n − 1) / n)
  test.each([
    [3, 1.1511],
    [5, 1.5712],
    [10, 1.7984],
  ])("Pope's tau, %d readings of one quantity", (n, printed) => {
    expect(Math.abs(popeTau(n - 1).isf(0.025) * Math.sqrt((n - 1) / n) - printed)).toBeLessThanOrEqual(0.00006);
  });

  test("Pope's tau ends at the root of the redundancy and tends to the normal", () => {
    expect(popeTau(10).sf(Math.sqrt(10))).toBe(0);
    near(popeTau(1e6).isf(0.025), normal.isf(0.025), 1e-5); // τ tends to the normal as 1/r
  });
});

describe("reference values, rounded from 40 digits", () => {
  // Incomplete gamma and beta functions evaluated with 40 digits by a general multiple-precision library (mpmath 1.3)
  test.each([
    [0.5, 0.3085375387259869],
    [1, 0.15865525393145705],
    [1.96, 0.024997895148220435],
    [3.29, 0.0005009369137857221],
    [5, 2.866515718791939e-7],
    [8, 6.220960574271784e-16],
    [20, 2.7536241186062337e-89],
    [37, 5.725571222524577e-300],
  ])("normal upper tail at %d", (z, reference) => {
    near(normal.sf(z), reference);
    near(normal.cdf(-z), reference);
    near(normal.isf(reference), z);
  });

  test.each([
    [1, 3.84, 0.9499564787512949, 0.050043521248705106],
    [2, 5.99, 0.9499633729134137, 0.05003662708658628],
    [10, 29.588, 0.9989998880589365, 0.0010001119410634818],
    [5, 60, 0.9999999999878454, 1.215456977718304e-11],
    [1138, 1000, 0.00133020292264709, 0.9986697970773529],
    [100, 200, 0.9999999882154993, 1.1784500720979422e-8],
    [2000, 1000, 3.2982727970671e-86, 1],
    [20000, 22000, 1, 1.692853149646932e-22],
  ])("chi-square, %d degrees of freedom at %d", (degrees, x, lower, upper) => {
    near(chiSquare(degrees).cdf(x), lower);
    near(chiSquare(degrees).sf(x), upper);
    near(lower < upper ? chiSquare(degrees).quantile(lower) : chiSquare(degrees).isf(upper), x);
  });

  test.each([
    [1, 1, 0.05, 161.4476387975885],
    [2, 10, 0.05, 4.102821015130401],
    [10, 10, 0.05, 2.978237016082322],
    [10, 30, 0.05, 2.164579917125474],
    [3, 20, 0.05, 3.09839121214078],
  ])("F, %d and %d degrees of freedom, upper %d", (numerator, denominator, level, reference) => {
    near(fisherF(numerator, denominator).isf(level), reference);
    near(fisherF(numerator, denominator).sf(reference), level);
  });

  // sums of 60-digit terms
  test.each([
    [6, 300, 1, 2.1622699388991976e-63, 1],
    [6, 300, 120, 2.951464649301367e-11, 0.9999999999704854],
    [100, 0.01, 400.04, 1, 1.6927942562088013e-37],
    [1, 300, 900, 1, 3.841412336726771e-37],
    [6, 17.07, 300, 1, 1.8004728500077147e-38],
  ])("non-central chi-square, %d degrees of freedom, λ = %d, at %d", (degrees, lambda, x, lower, upper) => {
    near(noncentralChiSquare(degrees, lambda).cdf(x), lower);
    near(noncentralChiSquare(degrees, lambda).sf(x), upper);
  });

  test("F far below its mean", () => near(fisherF(50, 1000).cdf(0.01), 8.029819511870058e-41));

  // confidence ellipse and ellipsoid: commonly quoted 39.35 %, 2.4477, 19.87 %, 2.7955
  test("the share within one standard deviation and the 95 % factor in one, two and three dimensions", () => {
    near(chiSquare(1).cdf(1), 0.6826894921370859);
    near(chiSquare(2).cdf(1), 0.3934693402873666);
    near(chiSquare(3).cdf(1), 0.1987480430987992);
    near(Math.sqrt(chiSquare(1).isf(0.05)), 1.9599639845400543);
    near(Math.sqrt(chiSquare(2).isf(0.05)), 2.4477468306808166);
    near(Math.sqrt(chiSquare(3).isf(0.05)), 2.7954834829151074);
  });
});

describe("closed forms", () => {
  test("chi-square with 2 degrees of freedom is exponential, 600 decades deep", () => {
    for (const x of [1e-12, 1e-3, 0.7, 1, 3, 50, 600, 1400]) {
      near(chiSquare(2).sf(x), Math.exp(-x / 2));
      near(chiSquare(2).cdf(x), -Math.expm1(-x / 2));
    }
    for (const p of [1e-300, 1e-100, 1e-9, 0.3, 0.5]) near(chiSquare(2).isf(p), -2 * Math.log(p));
    for (const p of [1e-300, 1e-100, 1e-9, 0.3, 0.9]) near(chiSquare(2).quantile(p), -2 * Math.log1p(-p));
  });

  test("Student's t with 1 degree of freedom is Cauchy, even where t² is no double", () => {
    for (const t of [1e-9, 0.2, 1, 7, 1e6, 1e150]) near(studentT(1).sf(t), Math.atan2(1, t) / Math.PI);
    for (const p of [1e-300, 1e-200, 1e-9, 0.2, 0.25, 0.4]) near(studentT(1).isf(p), 1 / Math.tan(Math.PI * p));
  });

  test("Student's t with 2 degrees of freedom: t = 2 (p − ½) √(2 / (4 p (1 − p)))", () => {
    for (const p of [0.1, 0.3, 0.6, 0.9, 0.99]) near(studentT(2).quantile(p), 2 * (p - 0.5) * Math.sqrt(2 / (4 * p * (1 - p))));
  });

  test("F with 2 and 2m degrees of freedom: sf = (1 + x / m)^−m", () => {
    for (const m of [1, 4, 300]) for (const x of [1e-6, 0.5, 1, 4]) near(fisherF(2, 2 * m).sf(x), Math.exp(-m * Math.log1p(x / m)));
  });

  test("non-central chi-square with 1 degree of freedom: two normal tails", () => {
    for (const lambda of [1e-3, 1, 17.07, 400])
      for (const root of [0.5, 3, 19, 25]) {
        const power = normal.sf(root - Math.sqrt(lambda)) + normal.sf(root + Math.sqrt(lambda));
        near(noncentralChiSquare(1, lambda).sf(root * root), power);
      }
  });
});

const distributions: [string, fc.Arbitrary<Distribution>][] = [
  ["normal", fc.constant(normal)],
  ["chi-square", fc.double({ min: 0.5, max: 3000, noNaN: true }).map(chiSquare)],
  ["Student's t", fc.double({ min: 0.7, max: 3000, noNaN: true }).map(studentT)],
  ["F", fc.tuple(fc.integer({ min: 1, max: 400 }), fc.integer({ min: 1, max: 4000 })).map(([a, b]) => fisherF(a, b))],
  [
    "non-central chi-square",
    fc.tuple(fc.integer({ min: 1, max: 60 }), fc.double({ min: 0, max: 200, noNaN: true })).map(([n, l]) => noncentralChiSquare(n, l)),
  ],
  // close to its end √r no double resolves τ, so small redundancies cannot undo a far quantile
  ["Pope's tau", fc.integer({ min: 50, max: 3000 }).map(popeTau)],
];

describe.each(distributions)("laws of %s", (_, distribution) => {
  const probability = fc.double({ min: 1e-9, max: 1 - 1e-9, noNaN: true });
  test("cdf and sf add up to 1, and quantile and isf undo them", () => {
    fc.assert(
      fc.property(distribution, probability, (of, p) => {
        const x = of.quantile(p);
        expect(Math.abs(of.cdf(x) + of.sf(x) - 1)).toBeLessThanOrEqual(4e-16);
        // a relative 1e−13 of x moves cdf by 1e−13 · x · density, below 1e−11 · min(p, 1 − p) here
        near(of.cdf(x), p, 1e-11);
        near(of.sf(of.isf(p)), p, 1e-11);
      }),
    );
  });

  test("cdf rises and quantile rises", () => {
    fc.assert(
      fc.property(distribution, probability, probability, (of, p, q) => {
        fc.pre(Math.abs(p - q) > 1e-9);
        expect(of.quantile(p) < of.quantile(q)).toBe(p < q);
        expect(of.isf(p) > of.isf(q)).toBe(p < q);
      }),
    );
  });
});

describe("bad input is named", () => {
  test.each([0, 1, -0.05, 5, Number.NaN])("level %d", (level) => {
    expect(() => chiSquare(3).quantile(level)).toThrow(LevelError);
    expect(() => normal.isf(level)).toThrow(`p = ${level}`);
  });
  test.each([0, -1, Number.NaN, Infinity])("degrees of freedom %d", (degrees) => {
    for (const make of [
      chiSquare,
      studentT,
      (n: number) => fisherF(n, 3),
      (n: number) => fisherF(3, n),
      (n: number) => noncentralChiSquare(n, 1),
      popeTau,
    ])
      expect(() => make(degrees)).toThrow(DegreesOfFreedomError);
  });
  test("a statistic that is not a number, a negative non-centrality, one surplus reading for Pope's tau", () => {
    expect(() => chiSquare(3).cdf(Number.NaN)).toThrow(ArgumentError);
    expect(() => noncentralChiSquare(3, -1)).toThrow("noncentrality = -1");
    expect(() => popeTau(1)).toThrow("add a reading");
  });
  test("infinity is no error: the tails end there", () => {
    for (const of of [normal, chiSquare(3), studentT(4), fisherF(2, 7), noncentralChiSquare(2, 3)]) {
      expect(of.cdf(Infinity)).toBe(1);
      expect(of.sf(Infinity)).toBe(0);
      expect(of.cdf(-Infinity)).toBe(0);
    }
  });
});
