export { applyEntry } from "./apply.js";
export type {
  CommentEntry,
  ForgetEntry,
  HeaderEntry,
  LogEntry,
  NumberedEntry,
  ReadingEntry,
  StateEntry,
  WithdrawEntry,
} from "./entries.js";
export { type ColumnMap, type ImportOptions, importCsv } from "./import.js";
export type { TextSource } from "./lines.js";
export { LogError, type LogErrorCode } from "./log-error.js";
export { LogParser } from "./parser.js";
export { LogReader, type ReadLogOptions, readLog } from "./reader.js";
export { siUnits, type Units } from "./units.js";
export { LogWriter } from "./write.js";
