// Figures that the project has set itself, beside what was measured.

export interface Target {
  readonly what: string;
  readonly value: number;
  /** The bound, where one is set for this line, and whether the value may not fall below it or not pass it. */
  readonly bound?: number | undefined;
  readonly side: "at least" | "at most";
  readonly met?: boolean;
}

const judged = (what: string, value: number, side: Target["side"], bound: number | undefined): Target =>
  bound === undefined ? { what, value, side } : { what, value, side, bound, met: side === "at least" ? value >= bound : value <= bound };

export const atLeast = (what: string, value: number, bound?: number): Target => judged(what, value, "at least", bound);
export const atMost = (what: string, value: number, bound?: number): Target => judged(what, value, "at most", bound);

const short = (value: number): string => (Math.abs(value) >= 100 ? value.toFixed(0) : value.toPrecision(3));

export function targetCell({ what, value, bound, side, met }: Target): string {
  const aim = bound === undefined ? "no target" : `${side === "at least" ? "≥" : "≤"} ${short(bound)}: ${met ? "met" : "NOT MET"}`;
  return `${what} ${short(value)} (${aim})`;
}
