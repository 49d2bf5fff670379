import { describe, expect, test } from "vitest";
import { LogError } from "../../src/log/log-error.js";
import { readAll, readAnyhow, smallLog } from "./reading-logs.js";
import { declared, refusedLines } from "./refused-lines.js";

describe("what a log may not hold", () => {
  const number = declared.length + 1;
  for (const { what, line, code, field, says } of refusedLines)
    test(`${what}: line, field, value and mend are named`, async () => {
      const refused = await readAll([...declared, line].join("\n").concat("\n")).catch((error: unknown) => error);
      expect(refused).toBeInstanceOf(LogError);
      const error = refused as LogError;
      expect({ code: error.code, line: error.line, field: error.field }).toEqual({ code, line: number, field });
      expect(error.message).toMatch(says);
      expect(error.message).toContain(`line ${number}`);
      expect(error.message).toContain(error.mend);
      if (field !== undefined) expect(error.message).toContain(`field "${field}"`);
      expect(structuredClone(error.details)).toEqual(error.details);
    });

  test("keeping going, every one of them is collected and the good lines are read", async () => {
    const { entries, problems, skipped } = await readAnyhow([...declared, ...refusedLines.map(({ line }) => line)].join("\n").concat("\n"));
    expect(entries).toHaveLength(declared.length);
    expect(problems.map((problem) => problem.line)).toEqual(refusedLines.map((_, k) => number + k));
    expect(skipped).toBe(0);
  });

  test("text that is not JSON, and comments in other languages' ways", async () => {
    await expect(readAll('{"state": "A", "kind": }\n')).rejects.toMatchObject({ code: "LOG_NOT_JSON", line: 1 });
    for (const comment of ["# pillars", "// pillars"])
      await expect(readAll(`${comment}\n`)).rejects.toMatchObject({
        message: expect.stringContaining('Write a comment as {"comment": "…"}'),
      });
  });

  const header = (units: string) => `{"log": "sigmatide/1", "units": ${units}}\n`;
  for (const [units, field, says] of [
    ['{"length": "gon"}', "units.length", /"gon" is a unit of angle, not of length\. Known: m, cm, mm, km/],
    ['{"angle": "mm"}', "units.angle", /"mm" is a unit of length, not of angle/],
    ['{"angle": "gom"}', "units.angle", /"gom" is not a known unit of angle\. Did you mean "gon"\?/],
    ['{"lenght": "m"}', "units", /Did you mean "length"\?/],
    ['{"angle": 400}', "units.angle", /400 is not a text/],
    ['"mm"', "units", /does not say what is measured in what/],
  ] as const)
    test(`units ${units}`, async () => {
      await expect(readAll(header(units) + smallLog)).rejects.toMatchObject({
        code: expect.stringMatching(/UNIT|VALUE/),
        field,
        line: 1,
        message: expect.stringMatching(says),
      });
    });

  test("a format or a version that is not known", async () => {
    await expect(readAll('{"log": "sigmatide/2"}\n')).rejects.toMatchObject({ code: "LOG_BAD_VALUE", message: /Write "sigmatide\/1"/ });
  });

  test("a refused reading leaves no name behind", async () => {
    const bad = '{"reading":"distance","states":["A","B"],"value":5,"standardDeviations":0,"name":"e"}';
    const { entries } = await readAnyhow([...declared, bad, bad.replace(":0,", ":1,")].join("\n"));
    expect(entries.at(-1)).toMatchObject({ name: "e", line: declared.length + 2 });
  });
});
