import type { NumberedEntry } from "./entries.js";
import { type Line, readLines, type TextSource } from "./lines.js";
import { LogError } from "./log-error.js";
import { LogParser } from "./parser.js";

export interface ReadLogOptions {
  /** Collect what is wrong in `problems` and go on with the next line, instead of throwing at the first. */
  readonly keepGoing?: boolean;
}

/**
 * A log read entry by entry: iterate over it once.
 *
 * Memory follows the estimate (its states, and names of readings that can be withdrawn), not the file. Without `keepGoing` the first line
 * that cannot be used throws a `LogError` out of the iteration; the entries before it have been given. A last line cut in the middle throws
 * `LOG_CUT` after every whole line has been given.
 */
export class LogReader implements AsyncIterable<NumberedEntry> {
  /** What was wrong, in order of lines; stays empty without `keepGoing`. */
  readonly problems: LogError[] = [];
  /** Lines that name a state already complained about: they would only repeat the complaint. */
  skipped = 0;
  linesRead = 0;
  /** For a progress display: bytes of the source behind the last entry. */
  bytesRead = 0;
  readonly #source: TextSource;
  readonly #keepGoing: boolean;
  readonly #parser = new LogParser();

  constructor(source: TextSource, options: ReadLogOptions = {}) {
    this.#source = source;
    this.#keepGoing = options.keepGoing ?? false;
  }

  async *[Symbol.asyncIterator](): AsyncGenerator<NumberedEntry> {
    for await (const line of readLines(this.#source)) {
      this.linesRead = line.number;
      this.bytesRead = line.bytesRead;
      const entry = this.#attempt(() => this.#parse(line));
      if (entry) yield entry;
    }
    if (this.problems.length === 0) this.#attempt(() => this.#parser.end());
  }

  #parse(line: Line): NumberedEntry | undefined {
    if (line.tooLong)
      throw new LogError(line.number, {
        code: "LOG_LINE_TOO_LONG",
        value: line.text,
        problem: "it does not end within 16 MiB.",
        mend: "Check that this is a log: one JSON object a line.",
      });
    if (line.invalidByte !== undefined)
      throw new LogError(line.number, {
        code: "LOG_NOT_UTF8",
        value: line.text,
        problem: `byte ${line.invalidByte + 1} of the line is not UTF-8.`,
        mend: "Save the log as UTF-8.",
      });
    try {
      return this.#parser.parseLine(line.text, line.number);
    } catch (error) {
      if (!(error instanceof LogError && error.code === "LOG_NOT_JSON" && line.open)) throw error;
      throw new LogError(line.number, {
        code: "LOG_CUT",
        value: line.text,
        problem: "the log ends in the middle of this line.",
        mend: "Every line before it was read; write the line again or delete it.",
      });
    }
  }

  #attempt<Result>(step: () => Result): Result | undefined {
    try {
      return step();
    } catch (error) {
      if (!(error instanceof LogError && this.#keepGoing)) throw error;
      const { refusedStates } = this.#parser;
      if (error.code === "LOG_UNKNOWN_STATE" && refusedStates.has(error.value as string)) this.skipped++;
      else {
        this.problems.push(error);
        if (error.code === "LOG_UNKNOWN_STATE") refusedStates.add(error.value as string);
      }
      return undefined;
    }
  }
}

/** Reads a log from its text, its bytes, or either in pieces (a file stream, a web stream, a socket). See `LogReader`. */
export function readLog(source: TextSource, options?: ReadLogOptions): LogReader {
  return new LogReader(source, options);
}
