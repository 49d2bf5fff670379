import { describe, expect, test } from "vitest";
import type { NumberedEntry } from "../../src/log/entries.js";
import { type ColumnMap, type ImportOptions, importCsv } from "../../src/log/import.js";
import type { TextSource } from "../../src/log/lines.js";
import { LogParser } from "../../src/log/parser.js";

async function importAll(table: TextSource, map: ColumnMap, options?: ImportOptions): Promise<NumberedEntry[]> {
  const entries: NumberedEntry[] = [];
  for await (const entry of importCsv(table, map, options)) entries.push(entry);
  return entries;
}
const points = 'id,east,north,held\nA,100,200,true\nB,160.5,280,false\n\n"C, ""old"" mark",1,2,\n';
const pointMap = { state: "$id", kind: "point-2d", value: ["$east", "$north"], fixed: "$held" };

describe("tables of comma-separated values", () => {
  test("points, with quoted cells, blank rows and empty cells", async () => {
    expect(await importAll(points, pointMap)).toEqual([
      { type: "state", name: "A", kind: "point-2d", value: Float64Array.of(100, 200), fixed: true, line: 2 },
      { type: "state", name: "B", kind: "point-2d", value: Float64Array.of(160.5, 280), fixed: false, line: 3 },
      { type: "state", name: 'C, "old" mark', kind: "point-2d", value: Float64Array.of(1, 2), fixed: false, line: 5 },
    ]);
  });

  test("readings after points, in the units of a header, with decimal commas and semicolons", async () => {
    const parser = new LogParser();
    parser.parseObject({ log: "sigmatide/1", units: { angle: "gon" }, deviationUnits: { length: "mm", angle: "mgon" } }, 1);
    await importAll(points, pointMap, { parser });
    const table = 'von;nach;strecke;sigma;zeit;name\r\nA;B;100,25;1,5;2031-04-02T06:30:00Z;"d\r\n1"\r\nB;A;100,26;2;12,5;\r\n';
    const map = {
      reading: "distance",
      states: ["$von", "$nach"],
      value: "$strecke",
      standardDeviations: "$sigma",
      time: "$zeit",
      name: "$name",
    };
    const entries = await importAll(table, map, { parser, decimalComma: true });
    expect(entries).toEqual([
      {
        type: "reading",
        kind: "distance",
        states: ["A", "B"],
        value: Float64Array.of(100.25),
        standardDeviations: Float64Array.of(0.0015),
        time: "2031-04-02T06:30:00Z",
        name: "d\n1",
        line: 2,
      },
      {
        type: "reading",
        kind: "distance",
        states: ["B", "A"],
        value: Float64Array.of(100.26),
        standardDeviations: Float64Array.of(0.002),
        time: 12.5,
        line: 4,
      },
    ]);
  });

  test("kinds may come from a column, and what a map says outright holds for every row", async () => {
    const table = "what,from,to,v\ndistance,A,B,5\nazimuth,A,B,1\n";
    const parser = new LogParser();
    await importAll(points, pointMap, { parser });
    const entries = await importAll(
      table,
      { reading: "$what", states: ["$from", "$to"], value: "$v", standardDeviations: 0.001 },
      { parser },
    );
    expect(entries.map((entry) => entry.type === "reading" && entry.kind)).toEqual(["distance", "azimuth"]);
  });

  test("what is wrong is told by row and column", async () => {
    await expect(importAll(points, { ...pointMap, value: ["$east", "$nort"] })).rejects.toMatchObject({
      line: 2,
      field: "value",
      message: /no column "nort"\. Did you mean "north"\?/,
    });
    await expect(importAll("id,east,north\nA,1.5,two\n", { ...pointMap, fixed: false })).rejects.toMatchObject({
      line: 2,
      field: "value",
      message: /"two" in column "north" is not a number/,
    });
    await expect(importAll("id,east,north\nA,1,5,2\n", pointMap)).rejects.toMatchObject({
      line: 2,
      message: /the row has 4 cells, the table 3 columns/,
    });
    await expect(importAll('id,east,north\n"A,1,2\nB,3,4\n', pointMap)).rejects.toMatchObject({
      line: 2,
      message: /double quote opened here is never closed/,
    });
    await expect(importAll("id,east,north,held\nA,1,2,\nA,1,2,\n", pointMap)).rejects.toMatchObject({ code: "LOG_NAME_TAKEN", line: 3 });
    await expect(importAll("id,east,north,held\nA,,2,\n", pointMap)).rejects.toMatchObject({
      code: "LOG_BAD_VALUE",
      line: 2,
      field: "value",
    });
    await expect(importAll(Uint8Array.of(0x69, 0x64, 0x0a, 0xff, 0x0a), pointMap)).rejects.toMatchObject({ code: "LOG_NOT_UTF8", line: 2 });
  });
});
