// `sigmatide assess` and `sigmatide demo` as they are installed: build/command.mjs in a process of its own.
import { type SpawnSyncReturns, spawn, spawnSync } from "node:child_process";
import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { progressOn } from "../../src/cli/progress.js";
import { parseAmount, UnitWriter } from "../../src/cli/units.js";
import { quayMonitoring } from "../../src/demo/monitoring.js";
import { LogWriter } from "../../src/log/write.js";

const command = fileURLToPath(new URL("../../build/command.mjs", import.meta.url));
const run = (...words: string[]): SpawnSyncReturns<string> =>
  spawnSync(process.execPath, [command, ...words], { encoding: "utf8", maxBuffer: 2 ** 28 });

let folder: string;
beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), "sigmatide-assess-"));
});
afterAll(() => rmSync(folder, { recursive: true }));
const logFile = (name: string, text: string | Uint8Array): string => {
  const file = join(folder, name);
  writeFileSync(file, text);
  return file;
};

/** P levelled four times from A, one run 8 mm off; Q twice from P. By hand: P = 11.002 m ± 0.5 mm; run 4 stands out by 6 / √(3/4). */
const levelling = `{"log": "sigmatide/1", "title": "Slipway <levels>", "units": {"length": "m"}, "deviationUnits": {"length": "mm"}}
{"state": "A", "kind": "height", "value": 10, "fixed": true}
{"state": "P", "kind": "height"}
{"state": "Q, east", "kind": "height"}
${[1, 1, 1, 1.008].map((value, k) => `{"reading": "height-difference", "states": ["A", "P"], "value": ${value}, "standardDeviations": 1, "name": "run ${k + 1}"}`).join("\n")}
{"reading": "height-difference", "states": ["P", "Q, east"], "value": 2, "standardDeviations": 1}
{"reading": "height-difference", "states": ["P", "Q, east"], "value": 2, "standardDeviations": 1}
`;

describe("a small levelling, by hand", () => {
  const log = () => logFile("levelling.jsonl", levelling);

  test("text: title, fit, the suspect with its line, states worst first, the caution", () => {
    const { status, stdout, stderr } = run("assess", log());
    expect({ status, stderr }).toEqual({ status: 0, stderr: "" });
    expect(stdout).toMatch(/^Slipway <levels>\n\n6 readings, 2 states estimated and 1 held fixed, 2 unknowns, redundancy 4\./);
    expect(stdout).toMatch(/Without the 1 suspect: The readings scatter \S+ times/);
    expect(stdout).toMatch(/^8 +run 4 +– +mm +8\.00 +1\.15 .* 6\.9 /m);
    const rows = [...stdout.matchAll(/^(P|Q, east) +(\d\d\.\d+) +([\d.]+) +([\d.]+)$/gm)].map((row) => row.slice(1));
    // σ_Q² = 1/4 + 1/2 mm², and 1.96 σ
    expect(rows).toEqual([
      ["Q, east", "13.00200", "0.866", "1.70"],
      ["P", "11.00200", "0.500", "0.980"],
    ]);
    expect(stdout).toMatch(/computed estimates[\s\S]*local\s+codes and a licensed professional/);
  });

  test("--set-aside gives values without the suspect", () => {
    const { stdout } = run("assess", log(), "--set-aside");
    expect(stdout).toMatch(/^P +11\.00000 +0\.577 +1\.13$/m);
    expect(stdout).toMatch(/Values below are without the\s+suspect\./);
  });

  test("--json holds every digit in SI units, with the lines of suspects", () => {
    const { status, stdout } = run("assess", log(), "--json", "--between", "A,P", "--confidence", "0.99");
    expect(status).toBe(0);
    const { title, states, screening, globalTest, between, confidence } = JSON.parse(stdout);
    expect({ title, confidence }).toEqual({ title: "Slipway <levels>", confidence: 0.99 });
    expect(globalTest.statistic).toBeCloseTo(48, 9);
    expect(screening.suspects[0].reading).toEqual({ line: 8, name: "run 4", kind: "height-difference", states: ["A", "P"] });
    expect(screening.suspects[0].discrepancy[0]).toBeCloseTo(0.008, 12);
    expect(screening.suspects[0].verdict.statistic).toBeCloseTo(6 / Math.sqrt(0.75), 9);
    const point = states.find(({ name }: { name: string }) => name === "P");
    expect(point.value[0]).toBeCloseTo(11.002, 12);
    expect(point.covariance[0]).toBeCloseTo(0.25e-6, 15);
    expect(between[0]).toMatchObject({ first: "A", second: "P", quantity: "length" });
    expect(between[0].difference[0]).toBeCloseTo(1.002, 12);
  });

  test("--csv: one line a state, names quoted where they must be", () => {
    const { stdout } = run("assess", log(), "--csv", "--limit", "1mm");
    const [head, first, second, ...rest] = stdout.trimEnd().split("\n");
    expect(head).toMatch(/^state,kind,value_1,.*,bearing,elevation,limit$/);
    expect(first).toMatch(/^"Q, east",height,13\.00(2|19999)/);
    expect(first!.endsWith(",fails")).toBe(true);
    expect(second!.endsWith(",meets")).toBe(true);
    expect(second!.split(",")).toHaveLength(head!.split(",").length);
    expect(rest).toEqual([]);
  });

  test("--limit: exit code 1 when a state or a pair fails it, 0 when all meet it", () => {
    const failing = run("assess", log(), "--limit", "1mm");
    expect(failing.status).toBe(1);
    expect(failing.stdout).toMatch(/1 of 2 fail the limit of 1\.00 mm at 95\s% confidence, worst first: Q, east\./);
    const meeting = run("assess", log(), "--limit", "1.7mm");
    expect(meeting.status).toBe(0);
    expect(meeting.stdout).toMatch(/All 2 meet the limit of 1\.70 mm/);
    // Q minus P: two runs of 1 mm each, 1.96 / √2 = 1.386 mm. The name has a comma in it.
    const { between } = JSON.parse(run("assess", log(), "--limit", "1.38mm", "--between", "P,Q, east", "--json").stdout);
    expect(between[0]).toMatchObject({ first: "P", second: "Q, east", tolerance: { verdict: "fails the limit" } });
    expect(between[0].semiAxes[0].length).toBeCloseTo(1.386e-3, 6);
  });

  test("the log may come from standard input", () => {
    const { status, stdout } = spawnSync(process.execPath, [command, "assess", "-"], { encoding: "utf8", input: levelling });
    expect(status).toBe(0);
    expect(stdout).toMatch(/^P +11\.00200/m);
  });

  test("--report writes one page that loads nothing, and leaves nothing else behind", () => {
    const page = join(folder, "levels.html");
    expect(run("assess", log(), "--report", page).status).toBe(0);
    const html = readFileSync(page, "utf8");
    expect(html).toMatch(/Slipway &lt;levels&gt;/);
    expect(html).toMatch(/no plan positions to draw/);
    expect(html).toMatch(/licensed professional/);
    expect(readdirSync(folder).filter((name) => name.includes(".part"))).toEqual([]);
    const nowhere = run("assess", log(), "--report", join(folder, "none", "levels.html"));
    expect(nowhere.status).toBe(2);
    expect(nowhere.stderr).toMatch(/cannot open .*levels\.html.* \(ENOENT\)/);
  });
});

describe("a hand-edited, broken log gets messages that a stranger can act on:", () => {
  const lines = levelling.trimEnd().split("\n");
  const edited = (line: number, text: string) => [...lines.slice(0, line - 1), text, ...lines.slice(line)].join("\n");
  const broken: Record<string, { log: () => string | Uint8Array; says: RegExp }> = {
    "an unknown kind": {
      log: () => edited(5, lines[4]!.replace("height-difference", "height-diference")),
      says: /line 5, field "reading": .*height-diference.*height-difference/,
    },
    "a negative standard deviation": {
      log: () => edited(6, lines[5]!.replace('"standardDeviations": 1', '"standardDeviations": -1')),
      says: /line 6, field "standardDeviations": -1 is not a standard deviation\. It must be greater than zero/,
    },
    "a station sighting itself": {
      log: () => edited(7, lines[6]!.replace('"A", "P"', '"P", "P"')),
      says: /line 7, field "states": "P" is both from and to: nothing can sight itself/,
    },
    "two states of one name": { log: () => edited(4, lines[2]!), says: /line 4, field "state": there is a state "P" already/ },
    "a misspelt state": {
      log: () => edited(9, lines[8]!.replace("Q, east", "Q, est")),
      says: /line 9, field "states": no state "Q, est".*"Q, east"/,
    },
    "a unit that does not fit": {
      log: () => edited(1, lines[0]!.replace('"mm"', '"gon"')),
      says: /line 1, .*"gon" is a unit of angle, not of length/,
    },
    "an empty log": { log: () => "", says: /the log: it is empty/ },
    "a log cut in the middle of a line": {
      log: () => levelling.slice(0, -20),
      says: /line 10: the log ends in the middle of this line\. Every line before it was read/,
    },
    "invalid UTF-8": {
      log: () => Buffer.concat([Buffer.from(`${lines.slice(0, 2).join("\n")}\n`), Buffer.from([0x7b, 0xff, 0x7d, 0x0a])]),
      says: /line 3: byte 2 of the line is not UTF-8/,
    },
    "a state that no reading holds": {
      log: () =>
        `${levelling}{"state": "R", "kind": "point-2d"}\n{"state": "S", "kind": "point-2d"}\n{"reading": "distance", "states": ["R", "S"], "value": 5, "standardDeviations": 1}\n`,
      says: /No starting value follows from the readings for "R", "S".*\(Declared: "R" on line 11, "S" on line 12\.\)/,
    },
    "a network that can move": {
      log: () =>
        `${levelling}{"state": "R", "kind": "height", "value": 5}\n{"state": "S", "kind": "height"}\n{"reading": "height-difference", "states": ["R", "S"], "value": 5, "standardDeviations": 1}\n`,
      says: /R.*S[\s\S]*\(Declared: .*"R" on line 11/,
    },
    "a reading between fixed states": {
      log: () =>
        `${levelling}{"state": "B", "kind": "height", "value": 5, "fixed": true}\n{"reading": "height-difference", "states": ["A", "B"], "value": -5, "standardDeviations": 1}\n`,
      says: /line 12: Every state of the reading on A, B is fixed: leave it out, or free a state/,
    },
  };
  for (const [name, { log, says }] of Object.entries(broken))
    test(name, () => {
      const { status, stdout, stderr } = run("assess", logFile("broken.jsonl", log()));
      expect(stderr).toMatch(says);
      expect({ status, stdout }).toEqual({ status: 2, stdout: "" });
      expect(stderr).not.toMatch(/^\s+at |undefined|internal error/m);
    });

  test("--keep-going collects them all, assesses the rest, and still ends with 2", () => {
    const spoiled = [
      ...lines.slice(0, 4),
      "# my note",
      lines[4]!.replace('"value": 1', '"value": "one"'),
      ...lines.slice(5),
      '{"withdraw": "run 9"}',
    ].join("\n");
    const { status, stdout, stderr } = run("assess", logFile("spoiled.jsonl", `${spoiled}\n`), "--keep-going");
    expect(status).toBe(2);
    expect(stderr.match(/line \d+/g)).toEqual(["line 5", "line 6", "line 12"]);
    expect(stderr).toMatch(/3 lines were left out; the rest is assessed/);
    expect(stdout).toMatch(/5 readings, 2 states/);
  });
});

describe("bad options end with exit code 2 and say what to write", () => {
  const cases: Record<string, { words: string[]; says: RegExp }> = {
    "a limit in no unit known": {
      words: ["--limit", "5 inches"],
      says: /positive number and its unit, such as 5mm\. Known units: m, cm, mm/,
    },
    "a limit for what the log does not hold": { words: ["--limit", "2mgon"], says: /no estimated state is measured in angles/ },
    "a confidence in percent": { words: ["--confidence", "95"], says: /between 0 and 1, such as 0\.95/ },
    "one name where two are needed": { words: ["--between", "P"], says: /--between is "P": give two names of states, such as A,B/ },
    "a state that is not there": {
      words: ["--between", "P,R"],
      says: /--between names "R", which the log does not declare or has forgotten: (did|give)/,
    },
    "a state and itself": { words: ["--between", "P,P"], says: /name two different states/ },
    "two formats": { words: ["--json", "--csv"], says: /cannot be used with/ },
    "a table of no rows": { words: ["--top", "0"], says: /whole number from 1, or "all"/ },
  };
  for (const [name, { words, says }] of Object.entries(cases))
    test(name, () => {
      const { status, stdout, stderr } = run("assess", logFile("levelling.jsonl", levelling), ...words);
      expect(stderr).toMatch(says);
      expect({ status, stdout }).toEqual({ status: 2, stdout: "" });
    });
  test("no such file", () => {
    const { status, stderr } = run("assess", join(folder, "none.jsonl"));
    expect(status).toBe(2);
    expect(stderr).toMatch(/cannot stat .*none\.jsonl \(ENOENT\)/);
  });
});

test("a log whose network would not fit into memory is refused with what to do; forgetting states makes it fit", () => {
  const chain = (forgets: boolean) => {
    const lines = ['{"state": "P0", "kind": "height", "value": 0, "fixed": true}'];
    for (let k = 1; k <= 1500; k++) {
      lines.push(`{"state": "P${k}", "kind": "height"}`);
      for (let again = 0; again < 20; again++)
        lines.push(`{"reading": "height-difference", "states": ["P${k - 1}", "P${k}"], "value": 1, "standardDeviations": 0.001}`);
      if (forgets && k > 1) lines.push(`{"forget": ["P${k - 1}"]}`);
    }
    return `${lines.join("\n")}\n`;
  };
  const assessed = (forgets: boolean) =>
    spawnSync(process.execPath, ["--max-old-space-size=64", command, "assess", "-"], { encoding: "utf8", input: chain(forgets) });
  const { status, stderr } = assessed(false);
  expect(status).toBe(2);
  expect(stderr).toMatch(/^sigmatide: line \d+: the network has come to .* readings[\s\S]*"forget" lines[\s\S]*--max-old-space-size=\d+/);
  const fits = assessed(true);
  expect(fits.status).toBe(0);
  // 1 500 steps of 1 m, each the mean of 20 runs of 1 mm
  expect(fits.stdout).toMatch(/^P1500 +1500\.0000 +0\.00866/m);
});

test("an interrupt leaves no page or a whole one, and nothing beside it", async () => {
  const writer = new LogWriter();
  const log = logFile("long.jsonl", Array.from(quayMonitoring().entries, (entry) => `${writer.line(entry)}\n`).join(""));
  for (const delay of [50, 600, 1500]) {
    const page = join(folder, `interrupted-${delay}.html`);
    const child = spawn(process.execPath, [command, "assess", log, "--report", page], { stdio: "ignore" });
    const timer = setTimeout(() => child.kill("SIGINT"), delay);
    await new Promise((resolve) => child.once("close", resolve));
    clearTimeout(timer);
    if (existsSync(page)) expect(readFileSync(page, "utf8").endsWith("</html>\n")).toBe(true);
    else expect(child.signalCode).toBe("SIGINT");
  }
  expect(readdirSync(folder).filter((name) => name.includes(".part"))).toEqual([]);
});

test("the README's log is assessed: M comes to (72, 21)", () => {
  const readme = readFileSync(new URL("../../README.md", import.meta.url), "utf8");
  const [, log] = /```json\n([\s\S]*?)```/.exec(readme)!;
  const { status, stdout } = run("assess", logFile("readme.jsonl", log!), "--json");
  expect(status).toBe(0);
  const { states, globalTest, screening } = JSON.parse(stdout);
  // 72² + 21² = 75²; the readings are off by up to 2 mm.
  for (const [k, expected] of [72, 21].entries()) expect(Math.abs(states[0].value[k] - expected)).toBeLessThan(0.005);
  expect(globalTest.verdict).toBe("as stated");
  expect(screening.suspects).toEqual([]);
});

test("demo: the settled bollard's region, the three blunders and nothing else, states worst first, the caution", () => {
  const { status, stdout, stderr } = run("demo");
  expect({ status, stderr }).toEqual({ status: 0, stderr: "" });
  const { truth } = quayMonitoring();
  const section = (heading: string) => stdout.split(/\n\n(?=[A-Z ,]+\n)/).find((part) => part.startsWith(heading))!;
  const moved = [...section("WHAT MOVED").matchAll(/^(B\d\d\.\d) +(\d) /gm)];
  const really = new Set(truth.settlement.moved.map(({ mark }) => mark));
  expect(moved.length).toBeGreaterThan(10);
  for (const [, mark, epoch] of moved) {
    expect(really.has(mark!), mark).toBe(true);
    expect(Number(epoch)).toBeGreaterThanOrEqual(truth.settlement.fromEpoch);
  }
  expect(moved.slice(0, 2).map(([, mark]) => mark)).toContain(truth.settlement.bollard);
  const doubted = [...section("SUSPECT READINGS").matchAll(/^ +(e\d\/\S+)/gm)].map(([, name]) => name!);
  expect(doubted.sort()).toEqual(truth.blunders.map(({ reading }) => reading).sort());
  const header = /^state .* a mm .*$/m.exec(stdout)![0].split(/ {2,}/);
  const table = section("POSITIONS").split("\n").slice(3);
  const worst = table.map((row) => Number(row.split(/ {2,}/)[header.indexOf("a mm")]));
  expect(worst).toHaveLength(10);
  expect(worst).toEqual([...worst].sort((a, b) => b - a));
  expect(stdout).toMatch(/computed estimates[\s\S]*local\s+codes and a licensed professional/);
});

test("progress is shown on a terminal alone, and its line is cleared", () => {
  const written: string[] = [];
  const terminal = (isTTY: boolean) => ({ isTTY, write: (text: string) => written.push(text) });
  const quiet = progressOn(terminal(false), "assess", 0);
  quiet.show(0.5);
  quiet.end();
  expect(written).toEqual([]);
  const shown = progressOn(terminal(true), "assess", 0);
  shown.show(0.5);
  shown.show(0.5001);
  shown.say("solving, iteration 1");
  shown.end();
  expect(written).toHaveLength(3);
  expect(written[0]).toMatch(/assess .* 50 %$/);
  expect(written[1]).toMatch(/assess: solving, iteration 1$/);
  expect(written[2]).toBe("\r\x1b[K");
});

test("numbers are written in the log's units, with the digits that their deviation deserves", () => {
  const units = new UnitWriter({ length: "m", angle: "gon", time: "s" }, { length: "mm", angle: "mgon", time: "ns" });
  expect(units.value("length", 1234.567891, 0.0004)).toBe("1234.56789");
  expect(units.value("length", -0.00001, 0.004)).toBe("0.0000");
  expect(units.deviation("length", 0.00123456)).toBe("1.23");
  expect(units.deviation("length", 12.3456)).toBe("12346");
  expect(units.deviation("angle", -Math.PI / 200_000)).toBe("−1.00");
  expect(units.bearing(Math.PI / 2)).toBe("100");
  expect(parseAmount("5mm")).toEqual({ quantity: "length", amount: 0.005 });
  expect(parseAmount("2 mgon")).toEqual({ quantity: "angle", amount: (2 * Math.PI) / 200_000 });
  expect(parseAmount("0.5")).toEqual({ quantity: "plain", amount: 0.5 });
  expect(parseAmount("5 inches")).toBeUndefined();
  expect(parseAmount("five")).toBeUndefined();
});

test("a page with the network drawn: every state and reading in it, suspects in red, nothing loaded from elsewhere", () => {
  const file = join(folder, "quay.jsonl");
  const drawnLog = `{"log": "sigmatide/1", "title": "Quay"}
{"state": "A", "kind": "point-2d", "value": [0, 0], "fixed": true}
{"state": "B", "kind": "point-2d", "value": [400, 30], "fixed": true}
{"state": "C", "kind": "point-2d", "value": [350, 420], "fixed": true}
{"state": "P & Q", "kind": "point-2d", "value": [180, 190]}
${["A", "B", "C", "A", "B"]
  .map((from, k) => {
    const [x, y] = { A: [0, 0], B: [400, 30], C: [350, 420] }[from]! as [number, number];
    const value = Math.hypot(180 - x, 190 - y) + (k === 3 ? 0.2 : 0);
    return `{"reading": "distance", "states": ["${from}", "P & Q"], "value": ${value}, "standardDeviations": 0.005}`;
  })
  .join("\n")}
`;
  writeFileSync(file, drawnLog);
  const page = join(folder, "quay.html");
  expect(run("assess", file, "--report", page).status).toBe(0);
  expect(existsSync(page)).toBe(true);
  const html = readFileSync(page, "utf8");
  expect(html.match(/<path d="[^"]*"><title>[ABC]<\/title>/g)).toHaveLength(3);
  expect(html.match(/<ellipse [^>]*><title>P &amp; Q<\/title>/g)).toHaveLength(1);
  expect(html).toMatch(/class="doubted" d="M/);
  expect(html).toMatch(/default-src 'none'/);
  expect(html).not.toMatch(/(src|href)=|url\(|@import|<script|NaN|undefined|Infinity/);
});
