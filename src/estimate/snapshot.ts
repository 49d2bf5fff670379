// Snapshots of an estimate as bytes. All numbers are little-endian, as in WebAssembly memory:
//
//   byte 0       magic "SGMT"
//   byte 4       u32  format version
//   byte 8       u64  length of the whole in bytes
//   byte 16      u64  length T of the text, a multiple of 8
//   byte 24      text: JSON in UTF-8, padded with spaces
//   byte 24 + T  pool: f64 numbers, one array after another
//   last 4       u32  CRC-32 of all bytes before it
//
// The text is { lengths, rows, contents }. `lengths` has one count for each array in the pool. `rows` lists the rows of measurements, and
// `contents` is what `EstimateContents` says. An array in the pool is written {"@floats": index}, rows are written {"@rows": index}, so
// that what is shared is stored once and shared again after decoding; a number that JSON cannot say (NaN, infinities, −0) is written
// {"@number": index} and is an array of its own.
import { crc32 } from "../support/crc32.js";
import { SnapshotError } from "./commit-errors.js";
import type { SavedEngine } from "./engine.js";
import type { EstimateOptions } from "./estimate.js";
import type { MeasurementRecord, StateRecord } from "./records.js";
import type { CheckedMeasurement, StateId } from "./rows.js";
import type { WhitenedRows } from "./whitened.js";

const MAGIC = "SGMT";
const VERSION = 2;
const VERSION_AT = 4;
const LENGTH_AT = 8;
const TEXT_LENGTH_AT = 16;
const HEADER_BYTES = 24;
const CHECKSUM_BYTES = 4;
const SPACE = 0x20;

/** All that an estimate is made of. */
export interface EstimateContents {
  readonly options: EstimateOptions;
  readonly chosen: readonly StateId[] | undefined;
  readonly column: StateId | "newest" | undefined;
  readonly states: readonly StateRecord[];
  readonly measurements: readonly MeasurementRecord[];
  readonly condensed: readonly WhitenedRows[];
  readonly absorbedSquares: number;
  readonly absorbedFreedom: number;
  readonly absorbedBound: number;
  readonly noiseCondition: number;
  readonly newStates: readonly StateId[];
  readonly added: readonly number[];
  readonly withdrawn: readonly number[];
  readonly replaced: readonly (readonly [number, CheckedMeasurement])[];
  readonly forgotten: readonly StateId[];
  readonly inForce: number;
  readonly alive: number;
  readonly solution: Float64Array | undefined;
  /** Undefined before the first commit. */
  readonly engine: SavedEngine | undefined;
}

/** The bytes of an estimate; see above. Cost: a few passes over them. */
export function encodeSnapshot(contents: EstimateContents): Uint8Array {
  const arrays = new Numbered<Float64Array>();
  const rows = new Numbered<WhitenedRows>();
  const pack = (value: unknown): unknown => {
    if (value instanceof Float64Array) return { "@floats": arrays.numberOf(value) };
    if (typeof value === "number" && (!Number.isFinite(value) || Object.is(value, -0)))
      return { "@number": arrays.numberOf(Float64Array.of(value)) };
    return value;
  };
  const contentsText = JSON.stringify(contents, (_key, value) => (isRows(value) ? { "@rows": rows.numberOf(value) } : pack(value)));
  const rowsText = JSON.stringify(rows.all(), (_key, value) => pack(value));
  const all = arrays.all();
  const lengthsText = JSON.stringify(all.map(({ length }) => length));
  const text = new TextEncoder().encode(`{"lengths":${lengthsText},"rows":${rowsText},"contents":${contentsText}}`);

  const textBytes = Math.ceil(text.length / 8) * 8;
  const floats = all.reduce((sum, { length }) => sum + length, 0);
  const bytes = new Uint8Array(HEADER_BYTES + textBytes + 8 * floats + CHECKSUM_BYTES);
  const view = new DataView(bytes.buffer);
  for (let k = 0; k < MAGIC.length; k += 1) bytes[k] = MAGIC.charCodeAt(k);
  view.setUint32(VERSION_AT, VERSION, true);
  view.setBigUint64(LENGTH_AT, BigInt(bytes.length), true);
  view.setBigUint64(TEXT_LENGTH_AT, BigInt(textBytes), true);
  bytes.set(text, HEADER_BYTES);
  bytes.fill(SPACE, HEADER_BYTES + text.length, HEADER_BYTES + textBytes);
  const pool = new Float64Array(bytes.buffer, HEADER_BYTES + textBytes, floats);
  let at = 0;
  for (const array of all) {
    pool.set(array, at);
    at += array.length;
  }
  const end = bytes.length - CHECKSUM_BYTES;
  view.setUint32(end, crc32(bytes.subarray(0, end)), true);
  return bytes;
}

/** What `encodeSnapshot` was given; nothing in it refers to `bytes`. The checksum finds accidents, not forgeries.
 *  @throws {SnapshotError} bytes that are not a snapshot, not whole, damaged, or of another format version. */
export function decodeSnapshot(bytes: Uint8Array): EstimateContents {
  const textBytes = checkHeader(bytes);
  const end = bytes.length - CHECKSUM_BYTES;
  const poolAt = HEADER_BYTES + textBytes;
  const text = parse(bytes.subarray(HEADER_BYTES, poolAt));
  const pool = new Float64Array(new Uint8Array(bytes.subarray(poolAt, end)).buffer); // copied, since `bytes` may begin anywhere
  let at = 0;
  const arrays: Float64Array[] = [];
  for (const length of text.lengths) {
    arrays.push(pool.slice(at, at + length));
    at += length;
  }
  if (at !== pool.length) throw new SnapshotError("damaged", HEADER_BYTES, `the pool has ${pool.length} numbers and the text names ${at}`);

  const find = <T>(list: readonly T[], index: number): T => {
    const found = list[index];
    if (found === undefined) throw new SnapshotError("damaged", HEADER_BYTES, `the text refers to item ${index} of ${list.length}`);
    return found;
  };
  const rows: unknown[] = [];
  // In place: what was parsed is used for nothing else.
  const unpack = (value: unknown): unknown => {
    if (typeof value !== "object" || value === null) return value;
    if ("@floats" in value) return find(arrays, value["@floats"] as number);
    if ("@number" in value) return find(arrays, value["@number"] as number)[0];
    if ("@rows" in value) return find(rows, value["@rows"] as number);
    const parts = value as Record<string, unknown>;
    for (const key of Object.keys(parts)) parts[key] = unpack(parts[key]);
    return parts;
  };
  for (const each of text.rows) rows.push(unpack(each));
  return unpack(text.contents) as EstimateContents;
}

/** Gives the length of the text. */
function checkHeader(bytes: Uint8Array): number {
  if (!(bytes instanceof Uint8Array)) throw new SnapshotError("foreign", 0, "a Uint8Array is needed");
  for (let k = 0; k < Math.min(MAGIC.length, bytes.length); k += 1) {
    if (bytes[k] !== MAGIC.charCodeAt(k)) throw new SnapshotError("foreign", k, `a snapshot begins with "${MAGIC}"`);
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const least = HEADER_BYTES + CHECKSUM_BYTES;
  if (bytes.length < least)
    throw new SnapshotError("cut short", bytes.length, `there are ${bytes.length} bytes, and ${least} at least are needed`);
  const length = view.getBigUint64(LENGTH_AT, true);
  if (length !== BigInt(bytes.length)) {
    const problem = length > BigInt(bytes.length) ? "cut short" : "damaged";
    throw new SnapshotError(problem, LENGTH_AT, `it says ${length} bytes in all, and there are ${bytes.length}`);
  }
  const end = bytes.length - CHECKSUM_BYTES;
  const [stored, computed] = [view.getUint32(end, true), crc32(bytes.subarray(0, end))];
  if (stored !== computed) {
    const [a, b] = [stored, computed].map((sum) => sum.toString(16).padStart(8, "0"));
    throw new SnapshotError("damaged", end, `the checksum is ${a}, and that of the bytes before it is ${b}`);
  }
  const version = view.getUint32(VERSION_AT, true);
  if (version !== VERSION)
    throw new SnapshotError("another version", VERSION_AT, `the format version is ${version}, and this build reads ${VERSION}`);
  const textBytes = view.getBigUint64(TEXT_LENGTH_AT, true);
  if (textBytes % 8n !== 0n || BigInt(HEADER_BYTES) + textBytes > BigInt(end) || (end - HEADER_BYTES) % 8 !== 0)
    throw new SnapshotError("damaged", TEXT_LENGTH_AT, `it says ${textBytes} bytes of text, and ${end - HEADER_BYTES} follow`);
  return Number(textBytes);
}

function parse(bytes: Uint8Array): { lengths: number[]; rows: unknown[]; contents: unknown } {
  try {
    return JSON.parse(new TextDecoder().decode(bytes));
  } catch (error) {
    throw new SnapshotError("damaged", HEADER_BYTES, `the text cannot be read: ${String(error)}`);
  }
}

const isRows = (value: unknown): value is WhitenedRows =>
  typeof value === "object" && value !== null && "blocks" in value && "residual" in value;

/** Objects, each with the number of its first appearance. */
class Numbered<T extends object> {
  readonly #numbers = new Map<T, number>();
  numberOf(item: T): number {
    const number = this.#numbers.get(item) ?? this.#numbers.size;
    this.#numbers.set(item, number);
    return number;
  }
  all(): T[] {
    return [...this.#numbers.keys()];
  }
}
