// Numbers for people: in the units that the log declares, with as many digits as their precision deserves.
import { type AngleUnit, type LengthUnit, siUnits, type TimeUnit, type Units, unitSize, unitSizes } from "../log/units.js";
import type { Quantity } from "../model/index.js";

const significant = 3;
const mostDecimals = 9;
const minus = "−";

/** The units that a table is written in. */
export class UnitWriter {
  readonly #units: Units;
  readonly #deviationUnits: Units;

  constructor(units: Units = siUnits, deviationUnits: Units = units) {
    this.#units = units;
    this.#deviationUnits = deviationUnits;
  }

  /** " mm", or nothing for a plain number. */
  unit(quantity: Quantity): string {
    return quantity === "plain" ? "" : ` ${this.#units[quantity]}`;
  }

  deviationUnit(quantity: Quantity): string {
    return quantity === "plain" ? "" : ` ${this.#deviationUnits[quantity]}`;
  }

  /** A value to a tenth of its standard deviation. */
  value(quantity: Quantity, number: number, deviation: number): string {
    const size = unitSize(quantity, this.#units);
    return fixed(number / size, deviation > 0 ? Math.ceil(-Math.log10(deviation / size)) + 1 : 3);
  }

  /** A deviation, a semi-axis, a residual: three digits. */
  deviation(quantity: Quantity, number: number): string {
    const scaled = number / unitSize(quantity, this.#deviationUnits);
    if (!Number.isFinite(scaled)) return "–";
    if (scaled === 0) return "0";
    return fixed(scaled, significant - 1 - Math.floor(Math.log10(Math.abs(scaled))));
  }

  /** A bearing or an elevation, to the whole unit where that is as small as a degree. */
  bearing(radians: number): string {
    const size = unitSize("angle", this.#units);
    return fixed(radians / size, size < 0.1 ? 0 : 2);
  }
}

function fixed(number: number, decimals: number): string {
  const text = number.toFixed(Math.min(mostDecimals, Math.max(0, decimals)));
  return /[1-9]/.test(text) ? text.replace("-", minus) : text.replace("-", "");
}

/** What stands in it is not torn apart at the end of a line. */
const narrowSpace = "\u202f";

/** 12462 → "12 462". */
export const grouped = (count: number): string => String(count).replace(/\B(?=(\d{3})+$)/g, narrowSpace);

/** 0.05 → "5 %". */
export const percent = (fraction: number): string => `${Number((100 * fraction).toPrecision(3))}${narrowSpace}%`;

/** "5mm" → a length of 0.005; a number alone is plain. Undefined: no such amount. */
export function parseAmount(text: string): { quantity: Quantity; amount: number } | undefined {
  const [, number, unit] = /^\s*([+-]?[\d.]+(?:e[+-]?\d+)?)\s*([a-z]*)\s*$/i.exec(text) ?? [];
  const amount = Number(number);
  if (number === undefined || !Number.isFinite(amount)) return undefined;
  if (!unit) return { quantity: "plain", amount };
  for (const [quantity, sizes] of Object.entries(unitSizes) as ["length" | "angle" | "time", Record<string, number>][])
    if (Object.hasOwn(sizes, unit)) return { quantity, amount: amount * sizes[unit]! };
  return undefined;
}

export const knownUnits: string = Object.values(unitSizes)
  .flatMap((sizes: Partial<Record<LengthUnit | AngleUnit | TimeUnit, number>>) => Object.keys(sizes))
  .join(", ");
