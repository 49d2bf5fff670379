// Facts of the machine that every result carries.
import { execFileSync } from "node:child_process";
import { arch, cpus, platform, totalmem } from "node:os";

export interface Machine {
  readonly processor: string;
  readonly cores: number;
  readonly memoryGB: number;
  readonly system: string;
  readonly node: string;
  readonly compiler: string;
}

export function machine(): Machine {
  return {
    processor: cpus()[0]?.model.trim() ?? "unknown",
    cores: cpus().length,
    memoryGB: Math.round(totalmem() / 2 ** 30),
    system: `${platform()} ${arch()}`,
    node: process.version,
    compiler: firstLine("g++", ["--version"]) ?? "no g++",
  };
}

export function firstLine(program: string, args: readonly string[]): string | undefined {
  try {
    return execFileSync(program, args, { encoding: "utf8", stdio: ["ignore", "pipe", "ignore"] }).split("\n")[0];
  } catch {
    return undefined;
  }
}
