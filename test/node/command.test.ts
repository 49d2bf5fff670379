// The command as it is installed: build/command.mjs in a process of its own.
import { type SpawnSyncReturns, spawn, spawnSync } from "node:child_process";
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { readMatrixMarket } from "../../src/matrix/matrix-market-reader.js";

const command = fileURLToPath(new URL("../../build/command.mjs", import.meta.url));
const run = (...words: string[]): SpawnSyncReturns<string> => spawnSync(process.execPath, [command, ...words], { encoding: "utf8" });

/** tridiagonal [−1 2 −1] of order 5: its inverse is min(i, j) (6 − max(i, j)) ÷ 6, counting from 1 (Rutherford 1947). */
const expected = (i: number, j: number): number => (Math.min(i, j) * (6 - Math.max(i, j))) / 6;
const tridiagonal = `%%MatrixMarket matrix coordinate real symmetric
% second differences
5 5 9
1 1 2
2 1 -1
2 2 2
3 2 -1
3 3 2
4 3 -1
4 4 2
5 4 -1
5 5 2
`;

let folder: string;
let file: string;
beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), "sigmatide-command-"));
  file = join(folder, "tridiagonal.mtx");
  writeFileSync(file, tridiagonal);
});
afterAll(() => rmSync(folder, { recursive: true }));

const close = (actual: number, wanted: number) => expect(Math.abs(actual - wanted)).toBeLessThan(1e-14);

test("inverse prints variances and standard deviations as a table, or as JSON and CSV with every digit", () => {
  const table = run("inverse", file);
  expect(table).toMatchObject({ status: 0, stderr: "" });
  const lines = table.stdout.trimEnd().split("\n");
  expect(lines[0]).toMatch(/unknown +variance +standard deviation/);
  expect(lines).toHaveLength(6);
  expect(lines[3]!.trim().split(/ +/)).toEqual(["3", "1.50000000000", "1.22474487139"]);

  const { order, diagonal } = JSON.parse(run("inverse", file, "--json", "--diagonal").stdout);
  expect(order).toBe(5);
  for (let k = 1; k <= 5; k += 1) close(diagonal[k - 1], expected(k, k));

  const csv = run("inverse", file, "--csv").stdout.trimEnd().split("\n");
  expect(csv[0]).toBe("unknown,variance,standard_deviation");
  expect(Number(csv[2]!.split(",")[1])).toBe(diagonal[1]);
});

test("inverse --columns prints whole columns, counting from 1; --ordering changes nothing but rounding", () => {
  for (const ordering of ["automatic", "minimum-degree", "nested-dissection", "natural"]) {
    const answer = JSON.parse(run("inverse", file, "--columns", "4,2", "--json", "--ordering", ordering).stdout);
    expect(answer.columns).toEqual([4, 2]);
    for (const [c, j] of [4, 2].entries()) for (let i = 1; i <= 5; i += 1) close(answer.values[c][i - 1], expected(i, j));
  }
  const csv = run("inverse", file, "--columns", "3", "--csv").stdout.split("\n");
  expect(csv[0]).toBe("unknown,column_3");
  expect(run("inverse", file, "--columns", "3").stdout).toMatch(/unknown +column 3/);
});

test("inverse --pattern prints the matrix's own entries of the inverse in the Matrix Market format, JSON or CSV", () => {
  const file_ = readMatrixMarket(run("inverse", file, "--pattern").stdout);
  expect(file_).toMatchObject({ rows: 5, columns: 5, symmetric: true });
  expect(file_.values).toHaveLength(9);
  const { rows, columns, values } = JSON.parse(run("inverse", file, "--pattern", "--json").stdout);
  for (const [k, value] of values.entries()) close(value, expected(rows[k], columns[k]));
  expect(values).toEqual([...file_.values]);
  expect(run("inverse", file, "--pattern", "--csv").stdout.split("\n")[0]).toBe("row,column,value");
});

test("a rectangular matrix is a design matrix A: AᵀA is inverted, and standard error says so", () => {
  const design = join(folder, "design.mtx");
  writeFileSync(design, "%%MatrixMarket matrix array real general\n3 2\n1\n1\n1\n0\n1\n2\n");
  const answer = run("inverse", design, "--json", "--columns", "1,2");
  expect(answer.stderr).toMatch(/3 × 2: taken as a design matrix A, and AᵀA is inverted/);
  // AᵀA = [3 3; 3 5]; its inverse is [5 −3; −3 3] ÷ 6.
  const flat = JSON.parse(answer.stdout).values.flat();
  for (const [k, wanted] of [5 / 6, -0.5, -0.5, 0.5].entries()) close(flat[k], wanted);
});

test("--route takes a design matrix by its rows, or by AᵀA; automatic says which and why", () => {
  // Läuchli (1961): ones over δ on the diagonal. AᵀA = 1 1ᵀ + δ² I, its inverse (I − 1 1ᵀ ÷ (δ² + 2)) ÷ δ²; in f64 AᵀA is singular for δ = 1e-9.
  const design = join(folder, "lauchli.mtx");
  writeFileSync(design, "%%MatrixMarket matrix coordinate real general\n3 2 4\n1 1 1\n2 1 1e-9\n1 2 1\n3 2 1e-9\n");
  for (const [route, says] of [
    ["automatic", /orthogonal route: JᵀWJ is not safely positive definite/],
    ["orthogonal", /orthogonal route: the orthogonal route was asked for/],
  ] as const) {
    const { stdout, stderr, status } = run("inverse", design, "--json", "--route", route);
    expect(status).toBe(0);
    expect(stderr).toMatch(says);
    for (const variance of JSON.parse(stdout).diagonal) expect(Math.abs(variance / 5e17 - 1)).toBeLessThan(1e-6);
  }
  const information = run("inverse", design, "--route", "information");
  expect(information.status).toBe(2);
  expect(information.stderr).toMatch(/not safely positive/);
  const pattern = readMatrixMarket(run("inverse", design, "--pattern").stdout);
  expect(pattern).toMatchObject({ rows: 2, columns: 2, symmetric: true });
  expect(Math.abs(pattern.values[1]! / -5e17 - 1)).toBeLessThan(1e-6);
});

test("a matrix may come from standard input, and general ones are taken when they are symmetric", () => {
  const general = "%%MatrixMarket matrix array real general\n2 2\n2\n1\n1\n2\n";
  const answer = spawnSync(process.execPath, [command, "inverse", "-", "--json"], { encoding: "utf8", input: general });
  const { diagonal } = JSON.parse(answer.stdout);
  for (const value of diagonal) close(value, 2 / 3);
});

const wrong: Record<string, { words: () => string[]; says: RegExp }> = {
  "a misspelt option": { words: () => ["inverse", file, "--digonal"], says: /unknown option '--digonal'[\s\S]*Did you mean --diagonal\?/ },
  "a misspelt command": { words: () => ["invers", file], says: /unknown command 'invers'[\s\S]*Did you mean inverse\?/ },
  "no matrix": { words: () => ["inverse"], says: /missing required argument 'matrix'/ },
  "two answers at once": { words: () => ["inverse", file, "--diagonal", "--pattern"], says: /cannot be used with/ },
  "two formats at once": { words: () => ["inverse", file, "--json", "--csv"], says: /cannot be used with/ },
  "columns that are no numbers": { words: () => ["inverse", file, "--columns", "3,x"], says: /whole numbers from 1, such as 3,7/ },
  "a column past the last": { words: () => ["inverse", file, "--columns", "6"], says: /--columns names 6; the matrix has columns 1 to 5/ },
  "an unknown ordering": { words: () => ["inverse", file, "--ordering", "random"], says: /Allowed choices are automatic/ },
  "a route for a square matrix": {
    words: () => ["inverse", file, "--route", "orthogonal"],
    says: /--route is for rectangular matrices; this one is 5 × 5/,
  },
  "a route that does not exist": {
    words: () => ["inverse", file, "--route", "qr"],
    says: /Allowed choices are automatic, information, orthogonal/,
  },
  "a design matrix with an empty row": {
    words: () => {
      const design = join(folder, "empty-row.mtx");
      writeFileSync(design, "%%MatrixMarket matrix coordinate real general\n3 2 2\n1 1 1\n3 2 1\n");
      return ["inverse", design];
    },
    says: /Row 1 has no entry.*Counting from 1, as the file does, that is row 2/,
  },
  "a file that is not there": { words: () => ["inverse", join(folder, "none.mtx")], says: /cannot open .*none\.mtx \(ENOENT\)/ },
  "a folder": { words: () => ["inverse", folder], says: /cannot read .*\(EISDIR\)/ },
  "a malformed file": {
    words: () => {
      const malformed = join(folder, "malformed.mtx");
      writeFileSync(malformed, tridiagonal.replace("4 3 -1", "3 4 -1"));
      return ["inverse", malformed];
    },
    says: /sigmatide: Line 9: expected an entry of the lower triangle.*found row 3, column 4/,
  },
  "a matrix that is not positive definite": {
    words: () => {
      const singular = join(folder, "singular.mtx");
      writeFileSync(singular, tridiagonal.replaceAll(/([1-5]) \1 2/g, "$1 $1 -2"));
      return ["inverse", singular];
    },
    says: /pivot -2\.000e\+0 at column 0 .*Counting from 1, as the file does, that is column 1/,
  },
};

describe("bad input ends with exit code 2, a message on standard error and no stack trace:", () => {
  for (const [name, { words, says }] of Object.entries(wrong)) {
    test(name, () => {
      const { status, stdout, stderr } = run(...words());
      expect(status).toBe(2);
      expect(stdout).toBe("");
      expect(stderr).toMatch(says);
      expect(stderr).not.toMatch(/^\s+at /m);
    });
  }
});

test("a reader that closes the pipe early ends the command quietly", async () => {
  const large = join(folder, "large.mtx");
  const order = 60_000;
  const entries = Array.from({ length: order }, (_, k) => `${k + 1} ${k + 1} ${k + 1}`);
  writeFileSync(large, `%%MatrixMarket matrix coordinate real symmetric\n${order} ${order} ${order}\n${entries.join("\n")}\n`);
  const child = spawn(process.execPath, [command, "inverse", large]);
  let stderr = "";
  child.stderr.on("data", (text) => {
    stderr += text;
  });
  child.stdout.once("data", () => child.stdout.destroy());
  const status = await new Promise((resolve) => child.once("close", resolve));
  expect({ status, stderr }).toEqual({ status: 0, stderr: "" });
});

test("help and version go to standard output with exit code 0", () => {
  expect(run("--help")).toMatchObject({ status: 0, stdout: expect.stringMatching(/assess[\s\S]*demo[\s\S]*inverse[\s\S]*Exit codes/) });
  expect(run("inverse", "--help")).toMatchObject({ status: 0, stdout: expect.stringMatching(/--pattern/) });
  expect(run("--version")).toMatchObject({ status: 0, stdout: "0.1.0\n" });
});
