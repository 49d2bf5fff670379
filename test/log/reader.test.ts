import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { readLines } from "../../src/log/lines.js";
import type { LogError } from "../../src/log/log-error.js";
import { readLog } from "../../src/log/reader.js";
import { readAll, readAnyhow, smallLog } from "./reading-logs.js";

const gon = Math.PI / 200;
const bytes = (text: string) => new TextEncoder().encode(text);

describe("reading a log", () => {
  test("a small log in metres, gon and millimetres comes out in SI units", async () => {
    const entries = await readAll(smallLog);
    expect(entries.map((entry) => [entry.line, entry.type])).toEqual([
      [1, "header"],
      [2, "comment"],
      ...[3, 4, 5, 6].map((line) => [line, "state"]),
      ...[8, 9, 10].map((line) => [line, "reading"]),
      [11, "withdraw"],
      [12, "forget"],
    ]);
    expect(entries[2]).toEqual({ type: "state", name: "S1", kind: "point-3d", fixed: true, value: Float64Array.of(100, 200, 5), line: 3 });
    expect(entries[4]).toEqual({ type: "state", name: "M", kind: "point-3d", fixed: false, line: 5 });
    expect(entries[5]).toMatchObject({ value: Float64Array.of(12.5 * gon) });
    expect(entries[6]).toMatchObject({ kind: "direction", value: Float64Array.of(50 * gon), time: "2031-04-02T06:30:00Z" });
    expect((entries[6] as { standardDeviations: Float64Array }).standardDeviations[0]).toBeCloseTo(0.3e-3 * gon, 18);
    expect(entries[7]).toMatchObject({
      name: "d1",
      setup: { instrumentHeight: 1.6 },
      standardDeviations: Float64Array.of(1.5e-3),
      time: 1200.5,
    });
    const { covariance } = entries[8] as { covariance: Float64Array };
    for (const [k, entry] of [4e-6, 1e-6, 0, 1e-6, 9e-6, -1e-6, 0, -1e-6, 25e-6].entries()) expect(covariance[k]).toBeCloseTo(entry, 18);
    expect(entries[9]).toEqual({ type: "withdraw", reading: "d1", time: 1300, line: 11 });
  });

  test("a log without a header is in metres, radians and seconds", async () => {
    const [, reading] = await readAll(
      '{"state":"c","kind":"clock-offset"}\n{"reading":"scalar","states":"c","value":0.5,"standardDeviations":0.1}\n',
    );
    expect(reading).toMatchObject({ value: Float64Array.of(0.5), standardDeviations: Float64Array.of(0.1) });
  });

  test("the same entries come from text, bytes, pieces cut anywhere, a stream, and lines that end in CR LF", async () => {
    const log = smallLog.replace("first visit", "première visite à l’écluse 🌊");
    const whole = await readAll(log);
    expect(whole[0]).toMatchObject({ title: "Slipway, première visite à l’écluse 🌊" });
    expect(await readAll(bytes(log))).toEqual(whole);
    expect(await readAll(bytes(`\uFEFF${log}`))).toEqual(whole);
    expect(await readAll(log.replaceAll("\n", "\r\n"))).toEqual(whole);
    expect(await readAll(new Blob([log]).stream())).toEqual(whole);
    await fc.assert(
      fc.asyncProperty(fc.array(fc.nat(bytes(log).length), { maxLength: 12 }), fc.boolean(), async (cuts, asText) => {
        const all: Uint8Array | string = asText ? log : bytes(log);
        const at = [0, ...cuts.map((cut) => Math.min(cut, all.length)).sort((a, b) => a - b), all.length];
        expect(await readAll(at.slice(1).map((end, k) => all.slice(at[k], end)))).toEqual(whole);
      }),
      { numRuns: 50 },
    );
  });

  test("a source that reuses one buffer for every piece is read right", async () => {
    const all = bytes(smallLog);
    const buffer = new Uint8Array(7);
    function* reusing() {
      for (let start = 0; start < all.length; start += buffer.length) {
        const piece = all.subarray(start, start + buffer.length);
        buffer.set(piece);
        yield buffer.subarray(0, piece.length);
      }
    }
    expect(await readAll(reusing())).toEqual(await readAll(smallLog));
  });

  test("a last line without an end is read when it is whole", async () => {
    expect(await readAll(smallLog.trimEnd())).toEqual(await readAll(smallLog));
  });

  test("a last line cut in the middle is named after every whole line was given", async () => {
    const cut = smallLog.slice(0, smallLog.indexOf('"M"]}'));
    const before = (await readAll(smallLog)).slice(0, -1);
    const given: unknown[] = [];
    const reading = (async () => {
      for await (const entry of readLog(cut)) given.push(entry);
    })();
    await expect(reading).rejects.toMatchObject({ code: "LOG_CUT", line: 12, message: expect.stringContaining("ends in the middle") });
    expect(given).toEqual(before);
    const { entries, problems } = await readAnyhow(cut);
    expect(entries).toEqual(before);
    expect(problems.map(({ code, line }) => [code, line])).toEqual([["LOG_CUT", 12]]);
  });

  test("bytes that are not UTF-8 are named by line and place, and the lines around them are read", async () => {
    for (const bad of [[0xff], [0xc3], [0xef, 0xbf], [0xe2, 0x28], [0xed, 0xa0, 0x80]]) {
      const log = Uint8Array.of(...bytes('{"comment":"ok"}\n{"comment":"é'), ...bad, ...bytes(`"}\n${smallLog}`));
      const { problems } = await readAnyhow(log);
      expect(problems[0]).toMatchObject({ code: "LOG_NOT_UTF8", line: 2, message: expect.stringContaining("byte 15 of the line") });
    }
  });

  test("a file without line ends is refused instead of filling memory, and a long line does not hide the next", async () => {
    function* flood() {
      for (let k = 0; k < 40; k++) yield new Uint8Array(2 ** 20).fill(32);
      yield "\n";
      yield smallLog;
    }
    const { entries, problems } = await readAnyhow(flood());
    expect(problems.map(({ code, line }) => [code, line])).toEqual([["LOG_LINE_TOO_LONG", 1]]);
    expect(entries[0]).toMatchObject({ type: "header", line: 2 });
  });

  test("lines are handed on while the source still comes in, and the count of bytes follows", async () => {
    let pulled = 0;
    function* slowly() {
      for (let k = 0; k < 1000; k++) {
        pulled++;
        yield `{"state":"x${k}","kind":"scalar"}\n`;
      }
    }
    const reader = readLog(slowly());
    for await (const entry of reader) {
      expect(pulled).toBe(entry.line);
      if (entry.line === 3) break;
    }
    expect(reader.bytesRead).toBe(3 * '{"state":"x0","kind":"scalar"}\n'.length);
  });

  test("a stream whose reader stops early is closed", async () => {
    let cancelled = false;
    const stream = new ReadableStream<string>({
      pull: (controller) => controller.enqueue('{"comment":"more"}\n'),
      cancel: () => {
        cancelled = true;
      },
    });
    for await (const line of readLines(stream)) if (line.number === 5) break;
    expect(cancelled).toBe(true);
  });

  test("an empty log, a log of blanks and one without readings are refused", async () => {
    for (const log of ["", "\n \n", '{"comment":"nothing yet"}\n'])
      await expect(readAll(log)).rejects.toMatchObject({ code: "LOG_EMPTY", message: expect.stringContaining("it is empty") });
    await expect(readAll('{"state":"a","kind":"scalar"}\n')).rejects.toMatchObject({ code: "LOG_EMPTY", message: /holds no readings/ });
  });

  test("a forgotten state frees its name and closes its readings to withdrawal; a withdrawn reading frees its name", async () => {
    const state = '{"state":"a","kind":"scalar"}\n';
    const reading = '{"reading":"scalar","states":"a","value":1,"standardDeviations":1,"name":"r"}\n';
    const entries = await readAll(`${state}${reading}{"forget":"a"}\n${state}${reading}{"withdraw":"r"}\n${reading}`);
    expect(entries).toHaveLength(7);
    await expect(readAll(`${state}${reading}{"forget":"a"}\n{"withdraw":"r"}\n`)).rejects.toMatchObject({
      code: "LOG_UNKNOWN_READING",
      line: 4,
    });
  });

  test("keeping going, a refused state is told once, not again by each reading on it", async () => {
    const reading = '{"reading":"scalar","states":"a","value":1,"standardDeviations":1}\n';
    const { problems, skipped } = await readAnyhow(`{"state":"a","kind":"skalar"}\n${reading.repeat(50)}`);
    expect(problems.map(({ code }) => code)).toEqual(["LOG_UNKNOWN_KIND"]);
    expect(skipped).toBe(50);
    const undeclared = await readAnyhow(reading.repeat(50));
    expect(undeclared.problems.map(({ code, line }: LogError) => [code, line])).toEqual([["LOG_UNKNOWN_STATE", 1]]);
    expect(undeclared.skipped).toBe(49);
  });
});
