// npm run bench -- [SECTION…] [--section NAME,…] [--family NAME,…] [--quick] [--large] [--json FILE]
import { mkdirSync, writeFileSync } from "node:fs";
import { dirname } from "node:path";
import { parseArgs } from "node:util";
import init from "../src/index.js";
import { families } from "./families.js";
import { machine } from "./harness/machine.js";
import { line, type Row } from "./harness/report.js";
import { dense } from "./sections/dense.js";
import { factor } from "./sections/factor.js";
import { incremental } from "./sections/incremental.js";
import { inverse } from "./sections/inverse.js";
import { orthogonal } from "./sections/orthogonal.js";

const sections = [dense, factor, inverse, orthogonal, incremental];

const { values, positionals } = parseArgs({
  allowPositionals: true,
  options: {
    section: { type: "string", multiple: true, default: [] },
    family: { type: "string", multiple: true, default: [] },
    quick: { type: "boolean", default: false },
    large: { type: "boolean", default: false },
    json: { type: "string", default: "build/bench.json" },
  },
});
const listed = (given: readonly string[], known: readonly string[], what: string): string[] => {
  const names = given.flatMap((text) => text.split(","));
  for (const name of names) {
    if (known.includes(name)) continue;
    console.error(`no ${what} "${name}": there are ${known.join(", ")}`);
    process.exit(2);
  }
  return names;
};
const names = sections.map(({ name }) => name);
const asked = listed([...values.section, ...positionals], names, "section");
const options = {
  quick: values.quick,
  large: values.large,
  families: listed(values.family, Object.keys(families), "family"),
  time: values.quick ? 150 : 700,
};

await init();
const facts = machine();
console.log(
  Object.entries(facts)
    .map(([name, value]) => `${name}: ${value}`)
    .join("; "),
);
const rows: (Row & { section: string })[] = [];
for (const section of sections) {
  if (asked.length > 0 && !asked.includes(section.name)) continue;
  console.log(`\n${section.name}`);
  for (const timer of section.timers) console.log(`  inside the timer of ${timer}`);
  for await (const row of section.run(options)) {
    console.log(line(row));
    rows.push({ section: section.name, ...row });
  }
}
mkdirSync(dirname(values.json), { recursive: true });
writeFileSync(values.json, `${JSON.stringify({ machine: facts, quick: values.quick, rows }, null, 1)}\n`);
console.log(`\nas JSON: ${values.json}`);
