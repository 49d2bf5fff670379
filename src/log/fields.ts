// Reads the fields of one line's object, one checked getter a type; each complaint names the field, its value and the mend.
import { nearest } from "../support/nearest.js";
import { type Complaint, ComplaintError, type LogErrorCode, shown } from "./log-error.js";

export type LineObject = Readonly<Record<string, unknown>>;

export function complain(complaint: Complaint): never {
  throw new ComplaintError(complaint);
}

function bad(field: string, value: unknown, expected: string, mend: string, code: LogErrorCode = "LOG_BAD_VALUE"): never {
  complain({ code, field, value, problem: `${shown(value)} is not ${expected}.`, mend });
}

/** " — did you mean …?" when a known word is near. */
export function suggestion(word: string, known: Iterable<string>): string {
  const near = nearest(word, known);
  return near === undefined ? "" : `Did you mean "${near}"? `;
}

export function onlyFields(line: LineObject, known: readonly string[], what: string): void {
  for (const field of Object.keys(line)) {
    if (known.includes(field)) continue;
    const units = field === "unit" || field === "units" ? "Units are declared once, in the log's first line. " : "";
    complain({
      code: "LOG_UNKNOWN_FIELD",
      field,
      value: line[field],
      problem: `${what} has no such field.`,
      mend: `${units}${suggestion(field, known)}It may have ${known.join(", ")}.`,
    });
  }
}

export function required(line: LineObject, field: string, what: string): unknown {
  const value = line[field];
  if (value === undefined)
    complain({ code: "LOG_MISSING_FIELD", field, problem: `${what} lacks it.`, mend: `Add "${field}" to the line.` });
  return value;
}

export function text(field: string, value: unknown): string {
  return typeof value === "string" ? value : bad(field, value, "a text", "Write it in double quotes.");
}

export function name(field: string, value: unknown): string {
  const word = text(field, value);
  return word.trim() === "" ? bad(field, value, "a name", "Give a name with at least one letter.") : word;
}

/** A list of names; one name may stand without brackets. */
export function names(field: string, value: unknown): string[] {
  if (!Array.isArray(value)) return [name(field, value)];
  return value.length > 0 ? value.map((item) => name(field, item)) : bad(field, value, "a list of names", "Name at least one.");
}

export function oneOf<Word extends string>(field: string, value: unknown, known: readonly Word[], what: string, code: LogErrorCode): Word {
  const word = text(field, value);
  if ((known as readonly string[]).includes(word)) return word as Word;
  return complain({
    code,
    field,
    value,
    problem: `${shown(word)} is not a known ${what}.`,
    mend: `${suggestion(word, known)}Known: ${known.join(", ")}.`,
  });
}

export function finiteNumber(field: string, value: unknown): number {
  return typeof value === "number" && Number.isFinite(value)
    ? value
    : bad(field, value, "a finite number", "Write it as a number, without quotes.");
}

/** A list of `length` numbers; one number may stand without brackets. */
export function numbers(field: string, value: unknown, length: number, what: string): Float64Array {
  const list: readonly unknown[] = Array.isArray(value) ? value : [value];
  if (list.length !== length)
    complain({
      code: "LOG_BAD_VALUE",
      field,
      value,
      problem: `${shown(value)} has ${list.length} ${list.length === 1 ? "number" : "numbers"}.`,
      mend: `${what} takes ${length}.`,
    });
  return Float64Array.from(list, (item) => finiteNumber(field, item));
}

export function truth(field: string, value: unknown): boolean {
  return typeof value === "boolean" ? value : bad(field, value, "true or false", "Write true or false, without quotes.");
}

const rfc3339 = /^\d{4}-\d\d-\d\d[Tt ]\d\d:\d\d:\d\d(\.\d+)?([Zz]|[+-]\d\d:\d\d)$/;

/** Seconds, or a date and time as RFC 3339 writes it. */
export function moment(field: string, value: unknown): number | string {
  if (typeof value === "number") return finiteNumber(field, value);
  if (typeof value === "string" && rfc3339.test(value) && !Number.isNaN(Date.parse(value))) return value;
  return bad(field, value, "a time", 'Give seconds as a number, or a date and time such as "2031-04-02T06:30:00Z".');
}

/** A covariance of `rows` numbers: rows × rows, symmetric, positive definite. Row-major. */
export function covariance(field: string, value: unknown, rows: number): Float64Array {
  const shape = `Give ${rows} rows of ${rows} numbers.`;
  const notMatrix = () =>
    complain({ code: "LOG_BAD_NOISE", field, value, problem: `${shown(value)} is not a ${rows} × ${rows} matrix.`, mend: shape });
  if (!Array.isArray(value) || value.length !== rows) return notMatrix();
  const matrix = new Float64Array(rows * rows);
  for (const [i, row] of value.entries()) {
    if (!Array.isArray(row) || row.length !== rows) return notMatrix();
    for (const [j, item] of row.entries()) matrix[i * rows + j] = finiteNumber(field, item);
  }
  for (let i = 0; i < rows; i++)
    for (let j = 0; j < i; j++) {
      const [lower, upper] = [matrix[i * rows + j]!, matrix[j * rows + i]!];
      // Both halves are one number written twice: they may differ by the rounding of the last digits printed.
      if (Math.abs(lower - upper) > 1e-6 * Math.max(Math.abs(lower), Math.abs(upper)))
        complain({
          code: "LOG_BAD_NOISE",
          field,
          value,
          problem: `It is not symmetric: row ${i + 1}, column ${j + 1} is ${lower}, row ${j + 1}, column ${i + 1} is ${upper}.`,
          mend: "Give both halves alike.",
        });
      matrix[i * rows + j] = upper;
    }
  const row = firstIndefiniteRow(matrix, rows);
  if (row >= 0)
    complain({
      code: "LOG_BAD_NOISE",
      field,
      value,
      problem: `It is not positive definite: row ${row + 1} has no variance left beside the rows before it.`,
      mend: "Variances must be positive and correlations between −1 and 1, both excluded.",
    });
  return matrix;
}

/** The first row at which a Cholesky factorization meets a pivot that is not positive, or −1. */
function firstIndefiniteRow(matrix: Float64Array, rows: number): number {
  const l = new Float64Array(rows * rows);
  for (let i = 0; i < rows; i++)
    for (let j = 0; j <= i; j++) {
      let sum = matrix[i * rows + j]!;
      for (let k = 0; k < j; k++) sum -= l[i * rows + k]! * l[j * rows + k]!;
      if (i !== j) l[i * rows + j] = sum / l[j * rows + j]!;
      else if (sum > 4 * rows * Number.EPSILON * matrix[i * rows + i]!) l[i * rows + i] = Math.sqrt(sum);
      else return i;
    }
  return -1;
}
