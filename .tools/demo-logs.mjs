// Writes the demonstration logs and the truth behind them: node .tools/demo-logs.mjs [FOLDER] [ROUNDS]. Needs a build.
import { createWriteStream, mkdirSync, writeFileSync } from "node:fs";
import { Readable } from "node:stream";
import { pipeline } from "node:stream/promises";
import { quayMonitoring } from "../build/src/demo/monitoring.js";
import { yardPatrol } from "../build/src/demo/patrol.js";
import { LogWriter } from "../build/src/log/write.js";

const [folder = "build/demo", rounds] = process.argv.slice(2);
const options = rounds === undefined ? {} : { rounds: Number(rounds) };

function* lines(entries) {
  const writer = new LogWriter();
  for (const entry of entries) yield `${writer.line(entry)}\n`;
}

mkdirSync(folder, { recursive: true });
for (const [name, { entries, truth }] of Object.entries({ "quay-wall": quayMonitoring(options), "yard-patrol": yardPatrol(options) })) {
  await pipeline(Readable.from(lines(entries)), createWriteStream(`${folder}/${name}.jsonl`));
  writeFileSync(`${folder}/${name}.truth.json`, JSON.stringify(truth));
  console.log(`${folder}/${name}.jsonl and its truth`);
}
