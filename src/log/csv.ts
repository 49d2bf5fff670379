// Tables of comma-separated values as RFC 4180 writes them: a first row of column names, cells in double quotes where they hold a
// delimiter, a quote (doubled) or a line end.

import { readLines, type TextSource } from "./lines.js";
import { LogError } from "./log-error.js";

export interface CsvRow {
  /** The line of the file where the row begins. */
  readonly line: number;
  readonly cells: Readonly<Record<string, string>>;
}

export interface CsvOptions {
  /** Default: a comma; with a decimal comma, a semicolon. */
  readonly delimiter?: string;
}

/** The rows of a table after its first, cells by column name, blanks around them taken off. Rows without any text are passed over. */
export async function* readCsv(source: TextSource, delimiter: string): AsyncGenerator<CsvRow> {
  let columns: string[] | undefined;
  let pending = "";
  let start = 0;
  for await (const { number, text, invalidByte } of readLines(source)) {
    if (invalidByte !== undefined)
      throw new LogError(number, {
        code: "LOG_NOT_UTF8",
        value: text,
        problem: `byte ${invalidByte + 1} of the line is not UTF-8.`,
        mend: "Save the table as UTF-8.",
      });
    if (pending === "") start = number;
    pending = pending === "" ? text : `${pending}\n${text}`;
    const cells = splitRow(pending, delimiter);
    if (cells === undefined) continue; // inside a quoted cell
    pending = "";
    if (cells.every((cell) => cell === "")) continue;
    if (columns === undefined) {
      columns = cells;
      continue;
    }
    if (cells.length !== columns.length)
      throw new LogError(start, {
        code: "LOG_BAD_VALUE",
        value: cells.join(delimiter),
        problem: `the row has ${cells.length} cells, the table ${columns.length} columns.`,
        mend: `Check for a missing "${delimiter}" and for decimal commas.`,
      });
    yield { line: start, cells: Object.fromEntries(columns.map((column, k) => [column, cells[k]!])) };
  }
  if (pending !== "")
    throw new LogError(start, {
      code: "LOG_CUT",
      value: pending,
      problem: "a double quote opened here is never closed.",
      mend: "Close it, or double a quote that is part of the text.",
    });
}

/** The cells of one row, or `undefined` when a quoted cell has not ended. */
function splitRow(row: string, delimiter: string): string[] | undefined {
  const cells: string[] = [];
  let at = 0;
  for (;;) {
    while (row[at] === " ") at++;
    let cell: string;
    if (row[at] === '"') {
      let end = at + 1;
      while (row[end] !== '"' || row[end + 1] === '"') {
        if (end >= row.length) return undefined;
        end += row[end] === '"' ? 2 : 1;
      }
      cell = row.slice(at + 1, end).replaceAll('""', '"');
      at = row.indexOf(delimiter, end);
    } else {
      const end = row.indexOf(delimiter, at);
      cell = row.slice(at, end < 0 ? undefined : end).trim();
      at = end;
    }
    cells.push(cell);
    if (at < 0) return cells;
    at += delimiter.length;
  }
}
