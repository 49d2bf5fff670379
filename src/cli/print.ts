// Tables for people, CSV and JSON for programs. Programs get every digit; people get twelve.

/** Columns of equal length with their headings: numbers that count (indices) or measure. */
export interface Table {
  headings: readonly string[];
  columns: readonly ArrayLike<number>[];
  /** Which columns hold indices: they are printed as whole numbers. */
  indices: number;
}

const DIGITS = 12;
/** Lines written at a time. */
const LINES = 4096;

/** Text of a table piece by piece, so that a million lines need no million-line string. */
export function* tableText({ headings, columns, indices }: Table, format: "table" | "csv"): Generator<string> {
  const isCsv = format === "csv";
  const width = (c: number) => Math.max(headings[c]!.length, c < indices ? 8 : DIGITS + 7);
  const cell = (text: string, c: number) => (isCsv ? text : text.padStart(width(c)));
  const separator = isCsv ? "," : "  ";
  const heading = (name: string) => (isCsv ? name.replaceAll(" ", "_") : name);
  let lines = [headings.map((name, c) => cell(heading(name), c)).join(separator)];
  const rows = columns[0]!.length;
  for (let r = 0; r < rows; r += 1) {
    const cells = columns.map((column, c) => cell(c < indices || isCsv ? String(column[r]!) : column[r]!.toPrecision(DIGITS), c));
    lines.push(cells.join(separator));
    if (lines.length === LINES) {
      yield `${lines.join("\n")}\n`;
      lines = [];
    }
  }
  if (lines.length > 0) yield `${lines.join("\n")}\n`;
}
