// Robust weights: w(u) multiplies a reading's weight, u = its residual over its standard deviation (the square root of rᵀ R⁻¹ r for a
// reading of several rows). Each bends a loss ρ with ρ'(u) = u w(u), ρ ≈ u²/2 near 0.
// Sources: Huber (1964), "Robust estimation of a location parameter"; Beaton, Tukey (1974), the biweight; Holland, Welsch (1977),
// "Robust regression using iteratively reweighted least-squares", for the tuning constants: 95 % efficiency on Gaussian noise, one row.

export interface RobustWeight {
  readonly name: "huber" | "cauchy" | "tukey";
  /** Where the weight starts to bend, in standard deviations. */
  readonly tuning: number;
  weight(u: number): number;
  loss(u: number): number;
}

/** Full weight up to `tuning`, then k/|u|: a large residual pulls no harder than one at `tuning`. Convex: one minimum for a linear model. */
export function huber(tuning: number = 1.345): RobustWeight {
  return {
    name: "huber",
    tuning,
    weight: (u) => (Math.abs(u) <= tuning ? 1 : tuning / Math.abs(u)),
    loss: (u) => (Math.abs(u) <= tuning ? (u * u) / 2 : tuning * (Math.abs(u) - tuning / 2)),
  };
}

/** 1/(1 + (u/c)²): a large residual's pull fades as 1/|u|. Not convex: start from good values. */
export function cauchy(tuning: number = 2.385): RobustWeight {
  return {
    name: "cauchy",
    tuning,
    weight: (u) => 1 / (1 + (u / tuning) ** 2),
    loss: (u) => ((tuning * tuning) / 2) * Math.log1p((u / tuning) ** 2),
  };
}

/** (1 − (u/c)²)² inside ±c, nothing outside: a gross residual counts for nothing. Not convex: start from good values. */
export function tukey(tuning: number = 4.685): RobustWeight {
  const inside = (u: number) => Math.max(0, 1 - (u / tuning) ** 2);
  return {
    name: "tukey",
    tuning,
    weight: (u) => inside(u) ** 2,
    loss: (u) => ((tuning * tuning) / 6) * (1 - inside(u) ** 3),
  };
}
