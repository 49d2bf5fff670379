// Reads the Matrix Market exchange format: a banner line, comment lines, a size line, then one entry a line.
// Source: Boisvert, Pozo, Remington, "The Matrix Market Exchange Formats: Initial Design", NISTIR 5935 (1996).
import { MatrixMarketError } from "../errors.js";
import { compressEntries } from "./compress.js";
import type { SparseColumns } from "./sparse-columns.js";

/** What a Matrix Market text holds: compressed columns, rows ascending, duplicates added up. */
export interface MatrixMarketColumns extends SparseColumns {
  columnPointers: Int32Array;
  rowIndices: Int32Array;
  values: Float64Array;
  /** Whether the text says `symmetric`; the entries are then the lower triangle alone. */
  symmetric: boolean;
}

const NEWLINE = 10;
const SPACE = 32;
const PERCENT = 37;
const ZERO = 48;
const NINE = 57;
const LARGEST = 0x7fffffff;
/** A token is not repeated whole in an error: it may be a megabyte of something else. */
const SHOWN = 40;

/** Walks over a text token by token, line by line, without splitting it. */
class Scanner {
  readonly #text: string;
  #at = 0;
  #line = 1;

  constructor(text: string) {
    this.#text = text;
  }

  get line(): number {
    return this.#line;
  }

  fail(expected: string, found = this.#found()): never {
    throw new MatrixMarketError(this.#line, expected, found);
  }

  #found(): string {
    const word = this.word();
    if (word === "") return this.#at < this.#text.length ? "the end of the line" : "the end of the text";
    return `"${word.length > SHOWN ? `${word.slice(0, SHOWN)}…` : word}"`;
  }

  #skipBlanks(): number {
    for (;;) {
      const code = this.#text.charCodeAt(this.#at); // NaN at the end
      if (!(code <= SPACE) || code === NEWLINE) return code;
      this.#at += 1;
    }
  }

  /** The next word of this line; empty at the end of the line. */
  word(): string {
    this.#skipBlanks();
    const from = this.#at;
    while (this.#text.charCodeAt(this.#at) > SPACE) this.#at += 1;
    return this.#text.slice(from, this.#at);
  }

  /** A whole number in [lowest, highest] as the next word of this line. */
  integer(what: string, lowest: number, highest: number): number {
    const from = this.#at;
    let code = this.#skipBlanks();
    const first = this.#at;
    let value = 0;
    while (code >= ZERO && code <= NINE) {
      value = 10 * value + (code - ZERO);
      this.#at += 1;
      code = this.#text.charCodeAt(this.#at);
    }
    if (this.#at === first || code > SPACE || value < lowest || value > highest) {
      this.#at = from;
      this.fail(`${what}, a whole number from ${lowest} to ${highest}`);
    }
    return value;
  }

  /** A finite decimal number as the next word of this line. */
  real(whole: boolean): number {
    const from = this.#at;
    const word = this.word();
    const value = Number(word);
    const decimal = word !== "" && !/[xob]/i.test(word[1] ?? ""); // Number takes 0x10 too
    if (!decimal || !Number.isFinite(value) || (whole && !Number.isInteger(value))) {
      this.#at = from;
      this.fail(whole ? "a whole number, as the banner says integer" : "a finite number such as -1.5e3");
    }
    return value;
  }

  /** Nothing but blanks is left on this line; goes to the next one. */
  endLine(after: string): void {
    const code = this.#skipBlanks();
    if (code > SPACE) this.fail(`the end of the line after ${after}`);
    if (code === NEWLINE) this.#nextLine();
  }

  #nextLine(): void {
    this.#at += 1;
    this.#line += 1;
  }

  /** Goes to the next line that is neither blank nor a comment; false at the end of the text. */
  seekLine(): boolean {
    for (;;) {
      const code = this.#skipBlanks();
      if (code === PERCENT) {
        const end = this.#text.indexOf("\n", this.#at);
        this.#at = end < 0 ? this.#text.length : end;
      } else if (code === NEWLINE) this.#nextLine();
      else return !Number.isNaN(code);
    }
  }
}

interface Banner {
  coordinate: boolean;
  field: "real" | "integer" | "pattern";
  symmetric: boolean;
}

function readBanner(scanner: Scanner): Banner {
  const oneOf = <Word extends string>(what: string, words: readonly Word[]): Word => {
    const word = scanner.word();
    const known = words.find((candidate) => candidate === word.toLowerCase());
    return (
      known ??
      scanner.fail(`${what} in the banner: ${words.join(" or ")}`, word === "" ? "the end of the line" : `"${word.slice(0, SHOWN)}"`)
    );
  };
  oneOf("%%MatrixMarket", ["%%matrixmarket"]);
  oneOf("the object", ["matrix"]);
  const coordinate = oneOf("the format", ["coordinate", "array"]) === "coordinate";
  const field = oneOf("the field", coordinate ? (["real", "integer", "pattern"] as const) : (["real", "integer"] as const));
  const symmetric = oneOf("the symmetry", ["general", "symmetric"]) === "symmetric";
  scanner.endLine("the banner");
  return { coordinate, field, symmetric };
}

/**
 * Reads a text in the Matrix Market exchange format: coordinate or array; real, integer or pattern (every entry is 1); general or
 * symmetric. Entries at the same place add up; zeros of the array format off the diagonal are left out.
 * @throws {MatrixMarketError} naming the line and what was expected there.
 * Cost: O(length of the text).
 */
export function readMatrixMarket(text: string): MatrixMarketColumns {
  const scanner = new Scanner(text);
  const banner = readBanner(scanner);
  if (!scanner.seekLine()) scanner.fail("the size line");
  const rows = scanner.integer("the number of rows", 0, LARGEST);
  const columns = scanner.integer("the number of columns", 0, LARGEST);
  if (banner.symmetric && rows !== columns)
    scanner.fail("as many columns as rows, since the banner says symmetric", `${rows} and ${columns}`);
  const entries = (banner.coordinate ? readCoordinates : readArray)(scanner, banner, rows, columns, text.length);
  if (scanner.seekLine()) scanner.fail(`the end of the text after ${entries.read} entries`);
  const compressed = compressEntries(rows, columns, entries.rows, entries.columns, entries.values);
  return { rows, columns, symmetric: banner.symmetric, ...compressed };
}

interface Entries {
  /** Entries that the text holds; those kept may be fewer. */
  read: number;
  rows: Int32Array;
  columns: Int32Array;
  values: Float64Array;
}

/** Room for the entries that a text of this length can hold at most, two characters each, whatever its size line promises. */
function roomFor(promised: number, length: number): Omit<Entries, "read"> {
  const room = Math.min(promised, (length >> 1) + 1);
  return { rows: new Int32Array(room), columns: new Int32Array(room), values: new Float64Array(room) };
}

function readCoordinates(scanner: Scanner, { field, symmetric }: Banner, rowCount: number, columnCount: number, length: number): Entries {
  const read = scanner.integer("the number of entries", 0, LARGEST);
  scanner.endLine("the size line");
  const { rows, columns, values } = roomFor(read, length);
  for (let k = 0; k < read; k += 1) {
    if (!scanner.seekLine()) scanner.fail(`entry ${k + 1} of ${read}`);
    const row = scanner.integer("a row index", 1, rowCount);
    const column = scanner.integer("a column index", 1, columnCount);
    if (symmetric && row < column)
      scanner.fail("an entry of the lower triangle, since the banner says symmetric", `row ${row}, column ${column}`);
    rows[k] = row - 1;
    columns[k] = column - 1;
    values[k] = field === "pattern" ? 1 : scanner.real(field === "integer");
    scanner.endLine("the entry");
  }
  return { read, rows, columns, values };
}

function readArray(scanner: Scanner, { field, symmetric }: Banner, rowCount: number, columnCount: number, length: number): Entries {
  scanner.endLine("the size line");
  const promised = symmetric ? (rowCount * (rowCount + 1)) / 2 : rowCount * columnCount;
  const { rows, columns, values } = roomFor(promised, length);
  let read = 0;
  let kept = 0;
  for (let j = 0; j < columnCount; j += 1) {
    for (let i = symmetric ? j : 0; i < rowCount; i += 1) {
      read += 1;
      if (!scanner.seekLine()) scanner.fail(`value ${read} of ${promised}`);
      const value = scanner.real(field === "integer");
      scanner.endLine("the value");
      if (value === 0 && i !== j) continue;
      rows[kept] = i;
      columns[kept] = j;
      values[kept] = value;
      kept += 1;
    }
  }
  return { read, rows: rows.slice(0, kept), columns: columns.slice(0, kept), values: values.slice(0, kept) };
}
