import type { HeaderEntry } from "./entries.js";
import { complain, type LineObject, oneOf, text } from "./fields.js";
import { shown } from "./log-error.js";
import { type MeasuredQuantity, siUnits, type Units, unitSizes } from "./units.js";

/** The name of the format and its version. */
export const formatName = "sigmatide/1";

/** The first line of a log. Units not named are SI; units of deviations not named are those of values. */
export function readHeader(line: LineObject): HeaderEntry {
  if (line.log !== formatName)
    complain({
      code: "LOG_BAD_VALUE",
      field: "log",
      value: line.log,
      problem: `${shown(line.log)} is not a format known here.`,
      mend: `Write "${formatName}".`,
    });
  const units = readUnits("units", line.units, siUnits);
  const deviationUnits = readUnits("deviationUnits", line.deviationUnits, units);
  return { type: "header", units, deviationUnits, ...(line.title === undefined ? {} : { title: text("title", line.title) }) };
}

function readUnits(field: string, value: unknown, otherwise: Units): Units {
  if (value === undefined) return otherwise;
  const quantities = Object.keys(unitSizes) as MeasuredQuantity[];
  if (typeof value !== "object" || value === null || Array.isArray(value))
    complain({
      code: "LOG_BAD_UNIT",
      field,
      value,
      problem: `${shown(value)} does not say what is measured in what.`,
      mend: 'Write for example {"length": "m", "angle": "gon"}.',
    });
  const units: Record<string, string> = { ...otherwise };
  for (const [quantity, unit] of Object.entries(value)) {
    oneOf(field, quantity, quantities, "quantity with a unit", "LOG_BAD_UNIT");
    const sizes: object = unitSizes[quantity as MeasuredQuantity];
    const home = quantities.find((other) => typeof unit === "string" && Object.hasOwn(unitSizes[other], unit));
    if (home !== undefined && home !== quantity)
      complain({
        code: "LOG_BAD_UNIT",
        field: `${field}.${quantity}`,
        value: unit,
        problem: `"${unit}" is a unit of ${home}, not of ${quantity}.`,
        mend: `Known: ${Object.keys(sizes).join(", ")}.`,
      });
    units[quantity] = oneOf(`${field}.${quantity}`, unit, Object.keys(sizes), `unit of ${quantity}`, "LOG_BAD_UNIT");
  }
  return units as unknown as Units;
}
