// The published schema against a general validator of JSON Schema, draft 2020-12.
import Ajv from "ajv/dist/2020.js";
import { describe, expect, test } from "vitest";
import schema from "../../src/log/log.schema.json" with { type: "json" };
import { unitSizes } from "../../src/log/units.js";
import { readingKinds } from "../../src/model/reading-kinds.js";
import { type StateKindName, stateKinds } from "../../src/model/states.js";
import { readAll, smallLog } from "./reading-logs.js";
import { declared, refusedLines } from "./refused-lines.js";

const validate = new Ajv.default({ allErrors: true, strict: false, strictNumbers: true }).compile(schema);
const complaints = (line: string) => (validate(JSON.parse(line)) ? "" : JSON.stringify(validate.errors));

describe("the schema of the log", () => {
  test("accepts the lines that the reader accepts", () => {
    for (const line of [...smallLog.split("\n").filter(Boolean), ...declared]) expect(complaints(line), line).toBe("");
  });

  for (const { what, line, schema: visible } of refusedLines)
    test(`${visible ? "refuses" : "cannot see"} ${what}`, () => {
      // JSON.parse turns 1e999 into infinity, which the validator refuses as the reader does.
      if (line.includes("1e999")) return expect(complaints(line)).not.toBe("");
      return visible ? expect(complaints(line)).not.toBe("") : expect(complaints(line)).toBe("");
    });

  test("knows the same kinds and units as the code", () => {
    expect(schema.$defs.state.properties.kind.enum).toEqual(Object.keys(stateKinds));
    expect(schema.$defs.reading.properties.reading.enum).toEqual(Object.keys(readingKinds));
    for (const [quantity, units] of Object.entries(unitSizes))
      expect(schema.$defs.units.properties[quantity as keyof typeof unitSizes].enum).toEqual(Object.keys(units));
  });

  test("asks for as many numbers as the code does, kind by kind", async () => {
    const list = (length: number, item: number) => (length === 1 ? item : Array<number>(length).fill(item));
    const attempt = async (lines: object[]) => {
      const refused = await readAll(lines.map((line) => JSON.stringify(line)).join("\n")).then(
        () => "",
        (error) => error.code as string,
      );
      const seen = lines.map((line) => complaints(JSON.stringify(line))).join("");
      return { refused, seen };
    };
    const stateLine = (kind: StateKindName, name: string) => ({ state: name, kind });
    for (const kind of Object.values(stateKinds))
      for (let length = 1; length <= 8; length++) {
        const value = kind.name === "spatial-pose" && length === 7 ? [0, 0, 0, 1, 0, 0, 0] : list(length, 1);
        const line = { ...stateLine(kind.name, "a"), value };
        expect(complaints(JSON.stringify(line)) === "", `${kind.name} with ${length}`).toBe(length === kind.size);
      }
    for (const [name, kind] of Object.entries(readingKinds))
      for (const form of kind.forms) {
        const states = kind.roles.map((role) => role);
        const value = form.quantities.length === 7 ? [0, 0, 0, 1, 0, 0, 0] : list(form.quantities.length, 1);
        const line = { reading: name, states, value, standardDeviations: list(form.rowQuantities.length, 1) };
        const lines = [...states.map((state, k) => stateLine(form.states[k]![0]!, state)), line];
        expect(await attempt(lines), name).toEqual({ refused: "", seen: "" });
        const short = await attempt([...lines.slice(0, -1), { ...line, standardDeviations: list(form.rowQuantities.length + 4, 1) }]);
        expect([short.refused, short.seen !== ""], name).toEqual(["LOG_BAD_VALUE", true]);
      }
  });
});
