/** Where a log or a table comes from: its text, or its bytes or text in pieces, cut anywhere. */
export type TextSource =
  | string
  | Uint8Array
  | Iterable<Uint8Array | string>
  | AsyncIterable<Uint8Array | string>
  | ReadableStream<Uint8Array | string>;

/** One line, without its end. */
export interface Line {
  /** From 1. */
  readonly number: number;
  readonly text: string;
  /** Position in the line of the first byte that is not UTF-8; `text` then has a replacement character in its place. */
  readonly invalidByte?: number;
  /** The line was longer than allowed; `text` is its beginning. */
  readonly tooLong?: true;
  /** No line end follows: the last line of a file that may be cut. */
  readonly open?: true;
  /** Bytes of the source up to the end of this line. */
  readonly bytesRead: number;
}

/** No line of ours comes near; a file without line ends stops here instead of filling memory. */
const longestLine = 16 * 2 ** 20;
const lineFeed = 10;
const carriageReturn = 13;

/**
 * The lines of a source, one after another. Holds one piece of the source and one unfinished line, whatever the size of the whole.
 * Ends a line at LF or CR LF; drops a byte order mark at the start. An empty last line is not given.
 */
export async function* readLines(source: TextSource): AsyncGenerator<Line> {
  let number = 0;
  let bytesRead = 0;
  let skipping = false; // inside a line that was too long
  let held: Uint8Array[] = [];
  let heldLength = 0;
  const hold = (bytes: Uint8Array) => {
    if (skipping || bytes.length === 0) return;
    held.push(bytes.slice()); // the source may reuse its buffer
    heldLength += bytes.length;
  };
  const take = (ending: Uint8Array): Uint8Array => {
    const whole = held.length === 0 ? ending : concatenate([...held, ending], heldLength + ending.length);
    held = [];
    heldLength = 0;
    return whole;
  };

  for await (const piece of pieces(source)) {
    let start = 0;
    for (let end = piece.indexOf(lineFeed); end >= 0; end = piece.indexOf(lineFeed, start)) {
      const bytes = take(piece.subarray(start, end));
      bytesRead += end + 1 - start;
      start = end + 1;
      number++;
      if (skipping) skipping = false;
      else yield decodeLine(bytes, number, bytesRead);
    }
    bytesRead += piece.length - start;
    hold(piece.subarray(start));
    if (heldLength > longestLine) {
      yield { number: number + 1, text: decodeLine(take(new Uint8Array()).subarray(0, 80), 0, 0).text, tooLong: true, bytesRead };
      skipping = true;
    }
  }
  if (heldLength > 0) yield { ...decodeLine(take(new Uint8Array()), number + 1, bytesRead), open: true };
}

const decoder = new TextDecoder("utf-8", { fatal: true });
const lenient = new TextDecoder("utf-8", { ignoreBOM: true });

function decodeLine(bytes: Uint8Array, number: number, bytesRead: number): Line {
  const content = bytes[bytes.length - 1] === carriageReturn ? bytes.subarray(0, -1) : bytes;
  try {
    return { number, text: decoder.decode(content), bytesRead };
  } catch {
    return { number, text: lenient.decode(content), invalidByte: firstInvalid(content), bytesRead };
  }
}

/** Decoding with replacements and encoding again changes the bytes first where the first bad sequence begins. */
function firstInvalid(bytes: Uint8Array): number {
  const again = new TextEncoder().encode(lenient.decode(bytes));
  let at = bytes.findIndex((byte, k) => byte !== again[k]);
  while ((again[at]! & 0xc0) === 0x80) at--; // the replacement character may share its first bytes with the bad sequence
  return at;
}

function concatenate(parts: Uint8Array[], length: number): Uint8Array {
  const whole = new Uint8Array(length);
  let offset = 0;
  for (const part of parts) {
    whole.set(part, offset);
    offset += part.length;
  }
  return whole;
}

async function* pieces(source: TextSource): AsyncGenerator<Uint8Array> {
  const encoder = new TextEncoder();
  let half = ""; // first half of a surrogate pair that two pieces share
  const parts = typeof source === "string" || source instanceof Uint8Array ? [source] : "getReader" in source ? chunks(source) : source;
  for await (const part of parts) {
    if (typeof part !== "string") {
      yield part;
      continue;
    }
    const text = half + part;
    const last = text.charCodeAt(text.length - 1);
    half = last >= 0xd800 && last < 0xdc00 ? text.slice(-1) : "";
    yield encoder.encode(half ? text.slice(0, -1) : text);
  }
  if (half) yield encoder.encode(half);
}

/** A web stream read by its reader: not every browser can iterate over one. */
async function* chunks(stream: ReadableStream<Uint8Array | string>): AsyncGenerator<Uint8Array | string> {
  const reader = stream.getReader();
  try {
    for (let next = await reader.read(); !next.done; next = await reader.read()) yield next.value;
  } finally {
    await reader.cancel();
  }
}
