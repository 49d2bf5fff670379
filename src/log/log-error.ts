import { SigmatideError } from "../errors.js";

export type LogErrorCode =
  | "LOG_EMPTY"
  | "LOG_CUT"
  | "LOG_NOT_UTF8"
  | "LOG_LINE_TOO_LONG"
  | "LOG_NOT_JSON"
  | "LOG_UNKNOWN_LINE"
  | "LOG_UNKNOWN_FIELD"
  | "LOG_MISSING_FIELD"
  | "LOG_BAD_VALUE"
  | "LOG_BAD_NOISE"
  | "LOG_BAD_UNIT"
  | "LOG_LATE_HEADER"
  | "LOG_UNKNOWN_KIND"
  | "LOG_KINDS_DO_NOT_FIT"
  | "LOG_UNKNOWN_STATE"
  | "LOG_UNKNOWN_READING"
  | "LOG_NAME_TAKEN"
  | "LOG_SAME_STATE_TWICE";

/** What is wrong, without the line it stands on. */
export interface Complaint {
  readonly code: LogErrorCode;
  /** The field, or in a table the column. */
  readonly field?: string;
  readonly value?: unknown;
  /** A sentence: what is wrong. */
  readonly problem: string;
  /** A sentence: how to mend it. */
  readonly mend: string;
}

/** A line of a log that cannot be used: which line, which field, what stands there, and how to mend it. */
export class LogError extends SigmatideError {
  declare readonly code: LogErrorCode;
  /** 1 is the first line of the file; 0 when the whole file is meant. */
  readonly line: number;
  readonly field: string | undefined;
  readonly value: unknown;
  readonly mend: string;

  constructor(line: number, { code, field, value, problem, mend }: Complaint) {
    const place = [line > 0 ? `line ${line}` : "the log", ...(field === undefined ? [] : [`field "${field}"`])].join(", ");
    super(code, `${place}: ${problem} ${mend}`, { line, field, value });
    this.line = line;
    this.field = field;
    this.value = value;
    this.mend = mend;
  }
}

/** Raised inside a line, where its number is not known; the parser adds it. */
export class ComplaintError extends Error {
  readonly complaint: Complaint;
  constructor(complaint: Complaint) {
    super(complaint.problem);
    this.complaint = complaint;
  }
}

/** A value as a message shows it. */
export function shown(value: unknown): string {
  const text = JSON.stringify(value) ?? String(value);
  return text.length > 60 ? `${text.slice(0, 57)}…` : text;
}
