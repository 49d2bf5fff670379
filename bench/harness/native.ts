// Native peers: small C++ programs around Debian's general-purpose libraries, built once a run where compiler and library are there.
import { execFileSync } from "node:child_process";
import { existsSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import type { Information } from "../families/information.js";
import { firstLine } from "./machine.js";
import { summary, type Timing } from "./timing.js";

const folder = mkdtempSync(join(tmpdir(), "peers-"));
process.once("exit", () => rmSync(folder, { recursive: true, force: true }));

/** The allocator keeps its memory instead of returning it after each call, as a long-running program's would; one thread. */
const environment = {
  ...process.env,
  MALLOC_MMAP_THRESHOLD_: "4294967296",
  MALLOC_TRIM_THRESHOLD_: "4294967296",
  MALLOC_TOP_PAD_: "268435456",
  OMP_NUM_THREADS: "1",
};

/** Builds bench/native/NAME.cpp; undefined, with a line that says what is missing, where that cannot be. */
function build(name: string, header: string, flags: readonly string[]): string | undefined {
  const program = join(folder, name);
  if (existsSync(program)) return program;
  if (!existsSync(header)) return skip(name, `${header} is missing`);
  if (!firstLine("g++", ["--version"])) return skip(name, "g++ is missing");
  execFileSync("g++", ["-O3", "-march=native", "-DNDEBUG", "-std=c++17", "-o", program, join("bench", "native", `${name}.cpp`), ...flags], {
    stdio: "inherit",
  });
  return program;
}

const skipped = new Set<string>();
function skip(name: string, why: string): undefined {
  if (!skipped.has(name)) console.log(`peer ${name} skipped: ${why} (Debian: libeigen3-dev, libopenblas-serial-dev, g++)`);
  skipped.add(name);
  return undefined;
}

/** Eigen's SimplicialLLT with its AMD order on one matrix. */
export class EigenPeer {
  /** Entries of its L, and Σ over columns of (entries)². */
  readonly nonzeros: number;
  readonly flops: number;

  private constructor(
    private readonly program: string,
    private readonly file: string,
  ) {
    const { nonzeros, flops } = JSON.parse(this.#call(0, "facts")) as { nonzeros: number; flops: number };
    this.nonzeros = nonzeros;
    this.flops = flops;
  }

  /** Writes the matrix where the program finds it; undefined where the program cannot be built. One at a time: the file is the same. */
  static of({ order, columnPointers, rowIndices, values }: Information): EigenPeer | undefined {
    const program = build("eigen", "/usr/include/eigen3/Eigen/Sparse", ["-I/usr/include/eigen3"]);
    if (!program) return undefined;
    const file = join(folder, "matrix.bin");
    const part = (array: Int32Array | Float64Array): Uint8Array => new Uint8Array(array.buffer, array.byteOffset, array.byteLength);
    writeFileSync(file, Buffer.concat([part(Int32Array.of(order, values.length)), part(columnPointers), part(rowIndices), part(values)]));
    return new EigenPeer(program, file);
  }

  /** Milliseconds of one task, sampled for so long: analyzePattern; factorize on a known pattern; one solve; one of ten columns. */
  samples(task: "analyze" | "factor" | "solve" | "solveTen", time: number): number[] {
    return JSON.parse(this.#call(time, task)) as number[];
  }

  #call(time: number, task: string): string {
    return execFileSync(this.program, [this.file, String(time), task], { encoding: "utf8", env: environment, maxBuffer: 2 ** 26 });
  }
}

/** OpenBLAS, its serial build: square products, rank updates (lower half) and Cholesky factorizations of order n. */
export function openblas(orders: readonly number[], time: number): Map<number, Record<"product" | "rankUpdate" | "cholesky", Timing>> {
  const serial = "/usr/lib/x86_64-linux-gnu/openblas-serial";
  const program = build("openblas", `${serial}/libopenblas.so`, [`-L${serial}`, `-Wl,-rpath,${serial}`, "-lopenblas"]);
  const result = new Map<number, Record<"product" | "rankUpdate" | "cholesky", Timing>>();
  if (!program) return result;
  const lines = execFileSync(program, [String(time), ...orders.map(String)], { encoding: "utf8", env: environment })
    .trim()
    .split("\n");
  for (const text of lines) {
    const { order, product, rankUpdate, cholesky } = JSON.parse(text) as { order: number } & Record<
      "product" | "rankUpdate" | "cholesky",
      number[]
    >;
    result.set(order, { product: summary(product), rankUpdate: summary(rankUpdate), cholesky: summary(cholesky) });
  }
  return result;
}
