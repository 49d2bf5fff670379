// Parses the command line, runs one command, and turns what it throws into a message and an exit code.
import { readFileSync } from "node:fs";
import { Command, CommanderError } from "commander";
import init, { fusedIsAvailable } from "../../bindings/loader.js";
import { SigmatideError } from "../errors.js";
import { addAssessCommand } from "./assess.js";
import { addDemoCommand } from "./demo.js";
import { exits } from "./exits.js";
import { addInverseCommand } from "./inverse.js";

const loadKernel = async (): Promise<void> => {
  const name = fusedIsAvailable() ? "kernel_relaxed_bg" : "kernel_bg";
  await init(new URL(`./bindings/${name}.wasm`, import.meta.url));
};

/** A reader that has seen enough (`| head`) closes the pipe: no error, the rest goes nowhere. */
function endQuietlyOnClosedPipe(): void {
  process.stdout.on("error", (error: NodeJS.ErrnoException) => {
    if (error.code !== "EPIPE") throw error;
    process.exit(exits.fine);
  });
}

function versionOfPackage(): string {
  const facts = JSON.parse(readFileSync(new URL("../package.json", import.meta.url), "utf8"));
  return facts.version;
}

/** @returns the exit code. */
export async function run(words: readonly string[]): Promise<number> {
  endQuietlyOnClosedPipe();
  const program = new Command("sigmatide")
    .description(
      "Where everything is that was measured, how sure that is, and which readings to doubt; inverses of large information matrices.",
    )
    .version(versionOfPackage(), "--version", "print the version")
    .helpOption("--help", "print this help")
    .exitOverride()
    .addHelpText("after", "\nExit codes: 0 fine, 1 a state fails its limit, 2 bad input, 3 an error inside the program.");
  let outcome: number = exits.fine;
  addAssessCommand(program, loadKernel, (exitCode) => {
    outcome = exitCode;
  });
  addDemoCommand(program, loadKernel);
  addInverseCommand(program, loadKernel);
  try {
    await program.parseAsync(words, { from: "user" });
    return outcome;
  } catch (error) {
    return exitCodeOf(error);
  }
}

function exitCodeOf(error: unknown): number {
  if (error instanceof CommanderError) return error.exitCode === 0 ? exits.fine : exits.badInput; // commander has printed it
  if (error instanceof SigmatideError) {
    const { column, row } = error.details;
    const place = typeof column === "number" ? `column ${column + 1}` : typeof row === "number" ? `row ${row + 1}` : "";
    const inFile = place ? ` (Counting from 1, as the file does, that is ${place}.)` : "";
    process.stderr.write(`sigmatide: ${error.message}${inFile}\n`);
    return exits.badInput;
  }
  const system = error as NodeJS.ErrnoException;
  if (system.syscall && system.code) {
    process.stderr.write(`sigmatide: cannot ${system.syscall} ${system.path ?? "the file"} (${system.code})\n`);
    return exits.badInput;
  }
  process.stderr.write(`sigmatide: internal error, please report it with the input: ${(error as Error)?.stack ?? error}\n`);
  return exits.internal;
}
