import type { Quantity } from "../model/quantities.js";

export type LengthUnit = "m" | "cm" | "mm" | "km";
export type AngleUnit = "rad" | "mrad" | "gon" | "mgon" | "deg" | "arcmin" | "arcsec";
export type TimeUnit = "s" | "ms" | "us" | "ns";

/** The units a log may declare, with their size in SI units. */
export const unitSizes: {
  readonly length: Readonly<Record<LengthUnit, number>>;
  readonly angle: Readonly<Record<AngleUnit, number>>;
  readonly time: Readonly<Record<TimeUnit, number>>;
} = {
  length: { m: 1, cm: 1e-2, mm: 1e-3, km: 1e3 },
  angle: {
    rad: 1,
    mrad: 1e-3,
    gon: Math.PI / 200,
    mgon: Math.PI / 200_000,
    deg: Math.PI / 180,
    arcmin: Math.PI / 10_800,
    arcsec: Math.PI / 648_000,
  },
  time: { s: 1, ms: 1e-3, us: 1e-6, ns: 1e-9 },
};

export type MeasuredQuantity = keyof typeof unitSizes;

export interface Units {
  readonly length: LengthUnit;
  readonly angle: AngleUnit;
  readonly time: TimeUnit;
}

export const siUnits: Units = { length: "m", angle: "rad", time: "s" };

/** The size in SI units of the unit that `quantity` is written in. */
export function unitSize(quantity: Quantity, units: Units): number {
  if (quantity === "plain") return 1;
  const sizes: Readonly<Record<string, number>> = unitSizes[quantity];
  return sizes[units[quantity]]!;
}
