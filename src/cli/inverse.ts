// `sigmatide inverse`: entries of the inverse of a matrix in a Matrix Market file.
import { readFileSync } from "node:fs";
import { type Command, InvalidArgumentError, Option } from "commander";
import { OptionError } from "../errors.js";
import type { CholeskyFactor, RowStatistics } from "../matrix/cholesky-factor.js";
import { factorizeAsync } from "../matrix/factorize.js";
import { factorizeRowsAsync } from "../matrix/factorize-rows.js";
import { type MatrixMarketColumns, readMatrixMarket } from "../matrix/matrix-market-reader.js";
import { columnsOfEntries } from "../matrix/sparse-columns.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import { tableText } from "./print.js";
import { progressOn } from "./progress.js";

interface InverseOptions {
  diagonal?: boolean;
  columns?: number[];
  pattern?: boolean;
  json?: boolean;
  csv?: boolean;
  ordering: "automatic" | "minimum-degree" | "nested-dissection" | "natural";
  route?: Route;
}

type Route = "automatic" | "information" | "orthogonal";

/** "3,7" → [3, 7]; the file counts from 1, and so does the command. */
function columnList(text: string): number[] {
  const columns = text.split(",").map(Number);
  if (!columns.every((column) => Number.isInteger(column) && column >= 1))
    throw new InvalidArgumentError("Give whole numbers from 1, such as 3,7.");
  return columns;
}

export function addInverseCommand(program: Command, loadKernel: () => Promise<void>): void {
  program
    .command("inverse")
    .description("entries of the inverse of a sparse symmetric positive definite matrix")
    .argument("<matrix>", "Matrix Market file, or - for standard input; a rectangular one is a design matrix A, and AᵀA is inverted")
    .addOption(new Option("--diagonal", "the diagonal: variances and standard deviations (the default)").conflicts(["columns", "pattern"]))
    .addOption(new Option("--columns <list>", "whole columns, counting from 1, such as 3,7").argParser(columnList).conflicts("pattern"))
    .option("--pattern", "the entries at the matrix's own; without --json or --csv in the Matrix Market format")
    .addOption(new Option("--json", "JSON, every digit").conflicts("csv"))
    .option("--csv", "comma-separated values, every digit")
    .addOption(
      new Option("--ordering <name>", "elimination order")
        .choices(["automatic", "minimum-degree", "nested-dissection", "natural"])
        .default("automatic"),
    )
    .addOption(
      new Option(
        "--route <name>",
        "for a rectangular matrix: by AᵀA, by its rows, or as the condition asks (automatic, the default)",
      ).choices(["automatic", "information", "orthogonal"]),
    )
    .helpOption("--help", "print this help")
    .exitOverride()
    .action(async (file: string, options: InverseOptions) => {
      const matrix = readMatrixMarket(readFileSync(file === "-" ? 0 : file, "utf8"));
      const { rows, columns: order } = matrix;
      const isDesign = rows !== order;
      if (options.route && !isDesign)
        throw new OptionError(`--route is for rectangular matrices; this one is ${rows} × ${order}: leave it out.`, { option: "route" });
      const outside = options.columns?.find((column) => column > order);
      if (outside) throw new OptionError(`--columns names ${outside}; the matrix has columns 1 to ${order}.`, { option: "columns" });
      if (isDesign) process.stderr.write(`sigmatide: the matrix is ${rows} × ${order}: taken as a design matrix A, and AᵀA is inverted\n`);
      const symmetric = isDesign ? undefined : symmetricFrom(matrix);
      await loadKernel();
      const { ordering, route } = options;
      const factorOf = (onProgress: (fraction: number) => void): Promise<CholeskyFactor> =>
        symmetric ? factorizeAsync(symmetric, { ordering, onProgress }) : factorizeRowsAsync(matrix, { ordering, route, onProgress });
      for (const text of await textOf(order, factorOf, options)) process.stdout.write(text);
    });
}

function symmetricFrom({ rows, columnPointers, rowIndices, values, symmetric }: MatrixMarketColumns): SymmetricMatrix {
  if (symmetric) return SymmetricMatrix.adopt({ order: rows, columnPointers, rowIndices, values });
  return SymmetricMatrix.fromColumns({ order: rows, columnPointers, rowIndices, values, triangle: "full" });
}

async function textOf(
  order: number,
  factorOf: (onProgress: (fraction: number) => void) => Promise<CholeskyFactor>,
  options: InverseOptions,
): Promise<Iterable<string>> {
  const progress = progressOn(process.stderr, "factor and inverse");
  let rows: RowStatistics | undefined;
  try {
    // The selected inverse costs about twice the factor.
    const factor = await factorOf((fraction) => progress.show(options.columns ? fraction : fraction / 3));
    rows = factor.statistics.rows;
    try {
      return await answer(order, factor, options, (fraction) => progress.show((1 + 2 * fraction) / 3));
    } finally {
      factor.dispose();
    }
  } finally {
    progress.end();
    if (rows) process.stderr.write(`sigmatide: ${rows.route} route: ${rows.because}\n`);
  }
}

async function answer(
  order: number,
  factor: CholeskyFactor,
  { columns, pattern, json, csv }: InverseOptions,
  onProgress: (fraction: number) => void,
): Promise<Iterable<string>> {
  const unknowns = Int32Array.from({ length: order }, (_, k) => k + 1);
  const asJson = (value: object) => [`${JSON.stringify(value)}\n`];
  const format = csv ? "csv" : "table";
  if (columns) {
    const flat = factor.inverseColumns(columns.map((column) => column - 1));
    const each = columns.map((_, c) => flat.subarray(c * order, (c + 1) * order));
    if (json) return asJson({ order, columns, values: each.map((column) => [...column]) });
    return tableText(
      { headings: ["unknown", ...columns.map((column) => `column ${column}`)], columns: [unknowns, ...each], indices: 1 },
      format,
    );
  }
  if (pattern) {
    const inverse = await factor.selectedInverseAsync({ pattern: "matrix", onProgress });
    if (!json && !csv) return [inverse.toMatrixMarket()];
    const rows = inverse.rowIndices.map((row) => row + 1);
    const columnOf = columnsOfEntries(inverse.columnPointers).map((column) => column + 1);
    if (json) return asJson({ order, rows: [...rows], columns: [...columnOf], values: [...inverse.values] });
    return tableText({ headings: ["row", "column", "value"], columns: [rows, columnOf, inverse.values], indices: 2 }, format);
  }
  // Whoever's rows needed the orthogonal route wants the digits that it kept.
  const method = factor.statistics.rows?.route === "orthogonal" ? "squares" : "selected";
  const variances = await factor.inverseDiagonalAsync({ method, onProgress });
  if (json) return asJson({ order, diagonal: [...variances] });
  const deviations = variances.map(Math.sqrt);
  return tableText(
    { headings: ["unknown", "variance", "standard deviation"], columns: [unknowns, variances, deviations], indices: 1 },
    format,
  );
}
