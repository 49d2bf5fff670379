// Published matrices that lie beside the repository, in ../shared/data/matrices, when there: Harwell-Boeing collection (Duff, Grimes, Lewis
// 1989, ACM Trans. Math. Softw. 15) and SuiteSparse Matrix Collection, with references in quad arithmetic. Not part of the package.
import { existsSync, readFileSync } from "node:fs";
import type { SparseColumns } from "../../src/index.js";

const folder = new URL("../../../shared/data/matrices/", import.meta.url);

export const publishedMatricesPresent = existsSync(folder);
export const publishedText = (file: string): string => readFileSync(new URL(file, folder), "utf8");

/** A number with 17 to 20 digits in a string. */
type Printed = string;
/** Row, column, value; counting from 1. */
type PrintedEntry = [number, number, Printed];

export interface SymmetricReference {
  n: number;
  published: { nnzCholeskyFactorAMD: number; flopsCholeskyAMD: number };
  logDet: Printed;
  traceInverse: Printed;
  inverseDiagonal: Printed[];
  inverseInPattern: PrintedEntry[];
  inverseOutsidePattern: PrintedEntry[];
}

interface LeastSquaresStep {
  logDetN: Printed;
  traceCofactor: Printed;
  solution: Printed[];
  cofactorDiagonal: Printed[];
}
export interface LeastSquaresReference extends LeastSquaresStep {
  cofactorInPattern: PrintedEntry[];
  cofactorOutsidePattern: PrintedEntry[];
  redundancyNumbers: Printed[];
  degreesOfFreedom: number;
  update1: LeastSquaresStep & { removedRows: number[] };
  update2: LeastSquaresStep & { addedCopies: number[]; copyWeight: number };
}

export interface GraphReference {
  n: number;
  edges: [number, number][];
  logDetN: Printed;
  cofactorDiagonal: Printed[];
  edgeResistance: Printed[];
}

export const reference = <T>(name: string): T => JSON.parse(publishedText(name)) as T;

const bodyOf = (text: string): string[][] =>
  text
    .split("\n")
    .filter((line) => line.trim() !== "" && !line.startsWith("%"))
    .map((line) => line.trim().split(/\s+/));

/** A coordinate file of a general real matrix, by columns; entries are listed column by column there. */
export function designMatrix(file: string): SparseColumns {
  const [size, ...entries] = bodyOf(publishedText(file));
  const [rows, columns] = size!.map(Number) as [number, number];
  const columnPointers = new Int32Array(columns + 1);
  for (const entry of entries) columnPointers[Number(entry[1])]! += 1;
  for (let j = 0; j < columns; j += 1) columnPointers[j + 1]! += columnPointers[j]!;
  return {
    rows,
    columns,
    columnPointers,
    rowIndices: entries.map((entry) => Number(entry[0]) - 1),
    values: entries.map((entry) => Number(entry[2])),
  };
}

/** An array file of one column. */
export const column = (file: string): number[] =>
  bodyOf(publishedText(file))
    .slice(1)
    .map((entry) => Number(entry[0]));
