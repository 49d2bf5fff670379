// `sigmatide assess`: from a measurement log to where everything is, how sure that is, and what to doubt.
import { createReadStream, renameSync, rmSync, statSync, writeFileSync } from "node:fs";
import { type Command, InvalidArgumentError, Option } from "commander";
import { type Assessment, assess, type Limits } from "../decide/index.js";
import { OptionError } from "../index.js";
import type { Quantity } from "../model/index.js";
import { nearest } from "../support/nearest.js";
import { assessmentAsJson, statesAsCsv } from "./data.js";
import { asText, type Document } from "./document.js";
import { exits } from "./exits.js";
import { findings, rowQuantitiesIn } from "./findings.js";
import { type LoadedNetwork, loadNetwork } from "./network.js";
import { asPage } from "./page.js";
import { progressOn } from "./progress.js";
import { grouped, knownUnits, parseAmount, UnitWriter } from "./units.js";

interface AssessOptions {
  confidence: number;
  level: number;
  limit: Partial<Record<Quantity, number>>;
  between: string[];
  setAside?: boolean;
  top: number;
  keepGoing?: boolean;
  json?: boolean;
  csv?: boolean;
  report?: string;
}

function probability(text: string): number {
  const number = Number(text);
  if (!(number > 0 && number < 1)) throw new InvalidArgumentError("Give a probability between 0 and 1, such as 0.95.");
  return number;
}

function limitAmong(text: string, before: Limits): Limits {
  const parsed = parseAmount(text);
  if (!parsed || !(parsed.amount > 0))
    throw new InvalidArgumentError(`Give a positive number and its unit, such as 5mm. Known units: ${knownUnits}.`);
  return { ...before, [parsed.quantity]: parsed.amount };
}

function rowsShown(text: string): number {
  if (text === "all") return Number.POSITIVE_INFINITY;
  const count = Number(text);
  if (!(Number.isInteger(count) && count > 0)) throw new InvalidArgumentError('Give a whole number from 1, or "all".');
  return count;
}

export function addAssessCommand(program: Command, loadKernel: () => Promise<void>, conclude: (exitCode: number) => void): void {
  program
    .command("assess")
    .description("where every state of a measurement log is, how sure that is, and which readings to doubt")
    .argument("<log>", "measurement log, one JSON object a line, or - for standard input")
    .option(
      "--limit <amount>",
      "largest semi-axis allowed, such as 5mm or 2mgon; exit code 1 when a state or pair fails it; repeat for other units",
      limitAmong,
      {},
    )
    .option(
      "--between <A,B>",
      "relative precision of two states; repeat for more pairs",
      (text: string, before: string[]) => [...before, text],
      [],
    )
    .option("--confidence <probability>", "of the regions and of the limit", probability, 0.95)
    .option("--level <probability>", "chance of any false alarm, of the global test and of all single tests together", probability, 0.05)
    .option("--set-aside", "give values and deviations without the suspect readings")
    .option("--top <count>", 'rows of each table of states, or "all"', rowsShown, 20)
    .option("--keep-going", "collect what is wrong with the log and assess the rest; exit code 2 when anything was")
    .addOption(new Option("--json", "JSON, SI units and radians, every digit").conflicts("csv"))
    .option("--csv", "the states as comma-separated values, SI units and radians, every digit")
    .option("--report <file>", "also write a page with the network drawn: one file that needs nothing else")
    .helpOption("--help", "print this help")
    .exitOverride()
    .action(async (file: string, options: AssessOptions) => {
      await loadKernel();
      conclude(await run(file, options));
    });
}

/** @returns the exit code. */
async function run(file: string, options: AssessOptions): Promise<number> {
  const size = file === "-" ? undefined : statSync(file).size;
  const progress = progressOn(process.stderr, file === "-" ? "assess" : `assess ${file}`);
  try {
    const network = await loadNetwork(file === "-" ? process.stdin : createReadStream(file), {
      keepGoing: options.keepGoing ?? false,
      size,
      progress,
    });
    tellProblems(network);
    const between = options.between.map((text) => pairNamed(text, network));
    const assessment = assess(network, {
      confidence: options.confidence,
      level: options.level,
      limits: options.limit,
      between,
      setAsideSuspects: options.setAside ?? false,
      onRound: (setAside) => progress.say(`testing readings, ${grouped(setAside)} set aside`),
    });
    progress.end();
    const document = documentOf(assessment, network, options.top);
    if (options.report !== undefined) await writeWhole(options.report, asPage(document, assessment, network));
    if (options.json) process.stdout.write(assessmentAsJson(assessment, network.header?.title));
    else if (options.csv) for (const line of statesAsCsv(assessment.states)) process.stdout.write(line);
    else process.stdout.write(asText(document));
    return network.problems.length > 0 ? exits.badInput : assessment.failing > 0 ? exits.attention : exits.fine;
  } finally {
    progress.end();
  }
}

function documentOf(assessment: Assessment, { header, adjustment }: LoadedNetwork, top: number): Document {
  const units = new UnitWriter(header?.units, header?.deviationUnits);
  return {
    title: header?.title ?? "Measurement log",
    blocks: findings(assessment, { units, top, rowQuantities: rowQuantitiesIn(adjustment) }),
  };
}

function tellProblems({ problems, skipped }: LoadedNetwork): void {
  for (const { message } of problems) process.stderr.write(`sigmatide: ${message}\n`);
  if (problems.length === 0) return;
  const passedOver = skipped > 0 ? `, and ${grouped(skipped)} lines that build on them` : "";
  process.stderr.write(`sigmatide: ${grouped(problems.length)} lines were left out${passedOver}; the rest is assessed\n`);
}

/** "A,B" → the two states; names may have commas in them. */
function pairNamed(text: string, { adjustment }: LoadedNetwork): readonly [string, string] {
  const names = new Set(Array.from(adjustment.states(), ({ name }) => name));
  const parts = text.split(",");
  const splits = parts.slice(1).map((_, k) => [parts.slice(0, k + 1), parts.slice(k + 1)].map((side) => side.join(",").trim()));
  const [first, second] = splits.find((pair) => pair.every((name) => names.has(name))) ?? [];
  if (first !== undefined && second !== undefined) return [first, second];
  const unknown = splits.length === 1 ? splits[0]!.find((name) => !names.has(name)) : undefined;
  const near = unknown === undefined ? undefined : nearest(unknown, names);
  const what = unknown === undefined ? `is "${text}"` : `names "${unknown}", which the log does not declare or has forgotten`;
  const mend = near === undefined ? "give two names of states, such as A,B." : `did you mean "${near}"?`;
  throw new OptionError(`--between ${what}: ${mend}`, { option: "between", value: text });
}

/** Writes a file so that it is there whole or not at all: also when the command is interrupted. */
async function writeWhole(file: string, text: string): Promise<void> {
  const beside = `${file}.${process.pid}.part`;
  let interrupted = false;
  const wait = () => {
    interrupted = true;
  };
  process.on("SIGINT", wait);
  try {
    writeFileSync(beside, text);
    renameSync(beside, file);
  } catch (error) {
    rmSync(beside, { force: true });
    throw error;
  } finally {
    await new Promise(setImmediate); // an interrupt that came meanwhile is delivered now
    process.removeListener("SIGINT", wait);
    if (interrupted) process.kill(process.pid, "SIGINT");
  }
}
