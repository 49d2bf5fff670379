import { type CsvOptions, readCsv } from "./csv.js";
import type { NumberedEntry } from "./entries.js";
import { suggestion } from "./fields.js";
import type { TextSource } from "./lines.js";
import { LogError, shown } from "./log-error.js";
import { LogParser } from "./parser.js";

/**
 * A line of a log in which a text that begins with `$` stands for the cell of that column, row by row:
 * `{"reading": "distance", "states": ["$from", "$to"], "value": "$metres", "standardDeviations": 0.002}`.
 */
export type ColumnMap = Readonly<Record<string, unknown>>;

export interface ImportOptions extends CsvOptions {
  /** Numbers are written 3,25. */
  readonly decimalComma?: boolean;
  /** Gives units, and knows the states declared so far; several tables share one. Default: SI, no states. */
  readonly parser?: LogParser;
}

/** Fields of a log line whose cells are numbers; in the others a cell is text, but for `time` and `fixed`, which may be either. */
const numberFields = new Set(["value", "standardDeviations", "covariance", "instrumentHeight", "targetHeight"]);

/**
 * The rows of a table as entries of a log, one a row. An empty cell leaves its field out.
 * @throws {LogError} with the row's line, and the field that the map fills from a column.
 */
export async function* importCsv(source: TextSource, map: ColumnMap, options: ImportOptions = {}): AsyncGenerator<NumberedEntry> {
  const { decimalComma = false, delimiter = decimalComma ? ";" : ",", parser = new LogParser() } = options;
  for await (const { line, cells } of readCsv(source, delimiter)) {
    const fill = (field: string, pattern: unknown): unknown => {
      if (Array.isArray(pattern)) return pattern.map((item) => fill(field, item));
      if (typeof pattern !== "string" || !pattern.startsWith("$")) return pattern;
      const column = pattern.slice(1);
      const cell = cells[column];
      if (cell === undefined)
        throw new LogError(line, {
          code: "LOG_UNKNOWN_FIELD",
          field,
          value: column,
          problem: `the table has no column "${column}".`,
          mend: `${suggestion(column, Object.keys(cells))}Its columns: ${Object.keys(cells).join(", ")}.`,
        });
      if (cell === "") return undefined;
      if (field === "fixed" && /^(true|false)$/i.test(cell)) return cell.toLowerCase() === "true";
      const number = Number(decimalComma ? cell.replace(",", ".") : cell);
      if (field === "time" && Number.isFinite(number)) return number;
      if (!numberFields.has(field)) return cell;
      if (!Number.isFinite(number))
        throw new LogError(line, {
          code: "LOG_BAD_VALUE",
          field,
          value: cell,
          problem: `${shown(cell)} in column "${column}" is not a number.`,
          mend: "Check the column map, and whether the table has decimal commas.",
        });
      return number;
    };
    const object = Object.fromEntries(
      Object.entries(map).flatMap(([field, pattern]) => {
        const value = fill(field, pattern);
        return value === undefined ? [] : [[field, value]];
      }),
    );
    yield parser.parseObject(object, line);
  }
}
