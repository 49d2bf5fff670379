// Confidence regions and what is decided by them: ellipse, ellipsoid, tolerance, movement.
import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { confidenceScale, errorEllipse, errorEllipsoid } from "../../src/decide/ellipse.js";
import { ArgumentError, CovarianceError, DegreesOfFreedomError, LevelError } from "../../src/decide/errors.js";
import { displacementTest } from "../../src/decide/movement.js";
import { differenceCovariance, toleranceVerdict } from "../../src/decide/tolerance.js";
import { covarianceOf, deviationFromRate, draw, randomFactor } from "./monte-carlo.js";

/** Covariance of (east, north) with semi-axes a ≥ b of one standard deviation, the major axis at a bearing. */
const turned = (a: number, b: number, bearing: number) => {
  const [s, c] = [Math.sin(bearing), Math.cos(bearing)];
  return [
    [a * a * s * s + b * b * c * c, (a * a - b * b) * s * c],
    [(a * a - b * b) * s * c, a * a * c * c + b * b * s * s],
  ];
};

describe("error ellipse", () => {
  test("gives back semi-axes and bearing, and the commonly quoted 2.4477 at 95 %", () => {
    fc.assert(
      fc.property(
        fc.double({ min: 1.1, max: 50, noNaN: true }),
        fc.double({ min: 0, max: Math.PI, maxExcluded: true, noNaN: true }),
        (ratio, bearing) => {
          const ellipse = errorEllipse(turned(ratio * 0.003, 0.003, bearing));
          expect(ellipse.scale).toBeCloseTo(2.4477468306808166, 13);
          expect(ellipse.semiMajor / (0.003 * ratio * ellipse.scale)).toBeCloseTo(1, 12);
          // the smaller eigenvalue is known to ε of the larger: a relative ε · ratio² of itself
          expect(Math.abs(ellipse.semiMinor / (0.003 * ellipse.scale) - 1)).toBeLessThanOrEqual(4e-16 * ratio ** 2 + 1e-12);
          // an axis turned by π is the same; its direction is lost as the axes become equal
          const apart = Math.abs(ellipse.bearing - bearing);
          expect(Math.min(apart, Math.PI - apart)).toBeLessThanOrEqual(1e-15 / (1 - ratio ** -2) + 1e-14);
          expect(ellipse.bearing >= 0 && ellipse.bearing < Math.PI).toBe(true);
        },
      ),
    );
  });

  test("bearings of plain axes", () => {
    expect(
      errorEllipse([
        [1, 0],
        [0, 4],
      ]).bearing,
    ).toBe(0);
    expect(
      errorEllipse([
        [4, 0],
        [0, 1],
      ]).bearing,
    ).toBeCloseTo(Math.PI / 2, 15);
    expect(
      errorEllipse([
        [2, 1],
        [1, 2],
      ]).bearing,
    ).toBeCloseTo(Math.PI / 4, 15);
    expect(
      errorEllipse([
        [2, -1],
        [-1, 2],
      ]).bearing,
    ).toBeCloseTo((3 * Math.PI) / 4, 15);
  });

  test("39.35 % lie within one standard deviation, and 95 % in the 95 % ellipse, 2 000 seeded draws", () => {
    const factor = [[3], [-2, 0.5]];
    const inside = (confidence: number) => {
      const { semiMajor, semiMinor, bearing } = errorEllipse(covarianceOf(factor), { confidence });
      const [s, c] = [Math.sin(bearing), Math.cos(bearing)];
      return (normal: () => number) => {
        const [east, north] = draw(factor, normal) as [number, number];
        return ((east * s + north * c) / semiMajor) ** 2 + ((east * c - north * s) / semiMinor) ** 2 <= 1;
      };
    };
    const one = 1 - Math.exp(-0.5); // quoted as 39.35 %
    expect(one).toBeCloseTo(0.3935, 4);
    expect(errorEllipse(covarianceOf(factor), { confidence: one }).scale).toBeCloseTo(1, 14);
    expect(deviationFromRate(11, one, inside(one))).toBeLessThanOrEqual(1);
    expect(deviationFromRate(12, 0.95, inside(0.95))).toBeLessThanOrEqual(1);
  });

  test("bad input is named", () => {
    expect(() =>
      errorEllipse([
        [1, 2],
        [2, 1],
      ]),
    ).toThrow(CovarianceError);
    expect(() => errorEllipse([1, 0, 0, 1], { confidence: 95 })).toThrow(LevelError);
    expect(() => confidenceScale(0, 0.9)).toThrow(DegreesOfFreedomError);
  });
});

describe("error ellipsoid", () => {
  test("of plain axes: lengths, bearings, elevations, and the commonly quoted 2.7955 at 95 %", () => {
    const { axes, scale } = errorEllipsoid([
      [1, 0, 0],
      [0, 4, 0],
      [0, 0, 9],
    ]);
    expect(scale).toBeCloseTo(2.7954834829151074, 13);
    expect(axes.map(({ length }) => length / scale)).toEqual([3, 2, 1].map((x) => expect.closeTo(x, 14)));
    expect(axes[0]!.elevation).toBeCloseTo(Math.PI / 2, 15);
    expect(axes[1]!.elevation).toBeCloseTo(0, 15);
    expect(axes[2]!.bearing % Math.PI).toBeCloseTo(Math.PI / 2, 15);
  });

  test("axes are orthogonal, do not point down, rebuild the covariance, and a vertical plane gives the ellipse", () => {
    const { normal } = random(3);
    for (let k = 0; k < 100; ++k) {
      const covariance = covarianceOf(randomFactor(3, normal));
      const { axes, scale } = errorEllipsoid(covariance, { confidence: 0.8 });
      const largest = (axes[0]!.length / scale) ** 2;
      for (let i = 0; i < 3; ++i)
        for (let j = 0; j < 3; ++j) {
          const entry = axes.reduce((sum, { length, direction }) => sum + (length / scale) ** 2 * direction[i]! * direction[j]!, 0);
          expect(Math.abs(entry - covariance[i]![j]!)).toBeLessThanOrEqual(1e-13 * largest);
        }
      for (const { direction, bearing, elevation } of axes) {
        expect(direction[2]).toBeGreaterThanOrEqual(0);
        expect(Math.cos(elevation) * Math.sin(bearing)).toBeCloseTo(direction[0], 13);
        expect(Math.cos(elevation) * Math.cos(bearing)).toBeCloseTo(direction[1], 13);
        expect(Math.sin(elevation)).toBeCloseTo(direction[2], 13);
      }
    }
  });
});

describe("tolerance", () => {
  test("one dimension: 1.96 standard deviations at 95 % (NIST e-Handbook, normal table)", () => {
    const of = (limit: number) => toleranceVerdict({ covariance: [0.0025 ** 2], dimension: 1, limit }, { name: "Bollard 4" });
    expect(of(0.005).statistic).toBeCloseTo(0.0025 * 1.959963984540054, 14);
    expect(of(0.005)).toMatchObject({ verdict: "meets the limit", threshold: 0.005, confidence: 0.95 });
    expect(of(0.004)).toMatchObject({ verdict: "fails the limit", share: expect.closeTo(1.2249775, 6) });
    expect(of(0.004).because).toBe(
      "Bollard 4 is known to 0.0049 in its worst direction with 95 % confidence, 1.22 times the limit of 0.004.",
    );
  });

  test("in the plane it is the major axis of the ellipse, and the verdict turns exactly there", () => {
    const covariance = turned(0.004, 0.001, 1);
    const { semiMajor } = errorEllipse(covariance, { confidence: 0.99 });
    const of = (limit: number) => toleranceVerdict({ covariance, dimension: 2, limit }, { confidence: 0.99 });
    expect(of(semiMajor * (1 + 1e-12)).verdict).toBe("meets the limit");
    expect(of(semiMajor * (1 - 1e-12)).verdict).toBe("fails the limit");
    expect(of(semiMajor).probability).toBeCloseTo(0.01, 13);
    expect(Math.abs(of(1).worstDirection[0]! / of(1).worstDirection[1]!)).toBeCloseTo(Math.tan(1), 12);
  });

  test("covariance of a difference", () => {
    const joint = covarianceOf(randomFactor(4, random(8).normal));
    const block = (i: number, j: number) => Float64Array.of(joint[i]![j]!, joint[i]![j + 1]!, joint[i + 1]![j]!, joint[i + 1]![j + 1]!);
    const difference = differenceCovariance(block(0, 0), block(2, 2), block(0, 2), 2);
    const rows = [
      [1, 0, -1, 0],
      [0, 1, 0, -1],
    ];
    for (let i = 0; i < 2; ++i)
      for (let j = 0; j < 2; ++j) {
        const entry = rows[i]!.reduce((sum, a, k) => sum + rows[j]!.reduce((s, b, l) => s + a * b * joint[k]![l]!, 0), 0);
        expect(difference[2 * i + j]).toBeCloseTo(entry, 13);
      }
  });

  test("bad input is named", () => {
    expect(() => toleranceVerdict({ covariance: [1], dimension: 1, limit: 0 })).toThrow("limit = 0");
    expect(() => toleranceVerdict({ covariance: [1], dimension: 0, limit: 1 })).toThrow(ArgumentError);
    expect(() => toleranceVerdict({ covariance: [0], dimension: 1, limit: 1 })).toThrow(CovarianceError);
    expect(() => toleranceVerdict({ covariance: [1], dimension: 1, limit: 1 }, { confidence: 0 })).toThrow("confidence = 0");
  });
});

describe("movement", () => {
  const factor = [[2], [1, 0.5], [-0.3, 0.2, 1]];
  const covariance = covarianceOf(factor);
  const level = 0.05;

  test("by hand: Σ = [[4, 2], [2, 2]], d = (2, 3) gives T = 5, below 5.991 (NIST e-Handbook)", () => {
    const of = displacementTest({
      displacement: [2, 3],
      covariance: [
        [4, 2],
        [2, 2],
      ],
    });
    expect(of.statistic).toBeCloseTo(5, 13);
    expect(of).toMatchObject({ verdict: "no movement shown", length: expect.closeTo(Math.sqrt(13), 14) });
    expect(
      displacementTest({
        displacement: [3, 4.5],
        covariance: [
          [4, 2],
          [2, 2],
        ],
      }).verdict,
    ).toBe("moved");
  });

  test("a state that stands still is called moved at the level, 2 000 seeded draws", () => {
    const alarm = (normal: () => number) =>
      displacementTest({ displacement: draw(factor, normal), covariance }, { level }).verdict === "moved";
    expect(deviationFromRate(13, level, alarm)).toBeLessThanOrEqual(1);
  });

  test("so it is when the variance factor is estimated, 2 000 seeded draws", () => {
    const alarm = (normal: () => number) => {
      let squares = 0;
      for (let k = 0; k < 5; ++k) squares += normal() ** 2;
      const varianceFactor = { value: (9 * squares) / 5, redundancy: 5 };
      const displacement = draw(factor, normal).map((x) => 3 * x);
      return displacementTest({ displacement, covariance }, { level, varianceFactor }).verdict === "moved";
    };
    expect(deviationFromRate(14, level, alarm)).toBeLessThanOrEqual(1);
  });

  test.each(["worst", "best"] as const)(
    "the smallest movement along the %s direction is found with the stated power, 2 000 seeded draws",
    (which) => {
      const { smallestDetectable, power } = displacementTest({ displacement: [0, 0, 0], covariance }, { level, power: 0.8 });
      const direction = which === "worst" ? smallestDetectable.worstDirection : bestDirection();
      const found = (normal: () => number) => {
        const displacement = draw(factor, normal).map((x, i) => x + smallestDetectable[which] * direction[i]!);
        return displacementTest({ displacement, covariance }, { level }).verdict === "moved";
      };
      expect(power).toBe(0.8);
      expect(deviationFromRate(15, power, found)).toBeLessThanOrEqual(1);
    },
  );
  const bestDirection = () => errorEllipsoid(covariance).axes[2]!.direction;

  test("bad input is named", () => {
    expect(() => displacementTest({ displacement: [1, 2], covariance: [1] })).toThrow(CovarianceError);
    expect(() => displacementTest({ displacement: [1], covariance: [1] }, { level: -1 })).toThrow(LevelError);
    expect(() => displacementTest({ displacement: [1], covariance: [1] }, { varianceFactor: { value: 1, redundancy: 0 } })).toThrow(
      DegreesOfFreedomError,
    );
  });
});
