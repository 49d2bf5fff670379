// The orthogonal route: the time of its numbers and its memory beside Cholesky's on the same pattern; what each route loses of a variance.
import { type KernelExports, status } from "../../bindings/kernel.js";
import { kernel } from "../../bindings/loader.js";
import { Loan } from "../../bindings/memory.js";
import { type CholeskyFactor, factorizeRows, type SparseColumns } from "../../src/index.js";
import { residualOf, transposedProduct } from "../../src/matrix/refinement.js";
import { type WeightedRows, weightedRows } from "../../src/matrix/weighted-rows.js";
import { chain } from "../families/chain.js";
import { type Information, information } from "../families/information.js";
import { byColumns, type Rows, whitenedRows } from "../families/rows.js";
import { type FamilyName, families } from "../families.js";
import { singleMatrices } from "../harness/matrices.js";
import type { Row, RunOptions, Section } from "../harness/report.js";
import { atMost } from "../harness/targets.js";
import { measureInTurn } from "../harness/timing.js";

/** Orthogonal ÷ Cholesky, numbers alone. */
const times: Readonly<Partial<Record<FamilyName, number>>> = { net: 4, patrol: 4, helix: 3 };
const MEMORY = 1.5;
const LARGEST_STATES = 10_000;
/** Unknowns whose variances are held against refined ones. */
const SAMPLES = 24;

export const orthogonal: Section = {
  name: "orthogonal",
  timers: [
    "orthogonal: the rows' numbers to L on a known pattern and plan, no right-hand side: workspace taken, eliminated, given back",
    "Cholesky: the matrix's numbers to L on the same pattern, as in the section factor but for the copy of the values",
    "÷ memory: bytes in use at most, analysis, matrix or rows, factor and workspace of the one ÷ those of the other",
    "accuracy: largest relative error of some variances, by each route's selected inverse and by squares, against columns refined with residuals in double-double",
  ],
  *run(options) {
    for (const family of singleMatrices) {
      if (options.families.length > 0 && !options.families.includes(family)) continue;
      for (const size of families[family].sizes) {
        if (size > LARGEST_STATES) continue;
        const stream = families[family].make(size);
        yield timed(family, size, information(stream), whitenedRows(stream), options);
        if (!options.quick) yield accuracy(family, size, whitenedRows(stream));
      }
    }
    if (options.families.length === 0 || options.families.includes("chain"))
      yield accuracy("chain, one tie", LARGEST_STATES, whitenedRows(chain(LARGEST_STATES, { fixEvery: 0 })));
  },
};

function analysed(k: KernelExports, { order, blockSizes }: Information, columnStart: number, rowIndex: number, loan: Loan): number {
  const job = k.analysisBegin(order, columnStart, rowIndex, blockSizes.length, loan.ints(blockSizes), 0, 0, 0);
  while (k.analysisAdvance(job, 1e18) === status.running);
  const symbolic = k.analysisFinish(job);
  k.analysisRelease(job);
  return symbolic;
}

function timed(family: FamilyName, size: number, matrix: Information, rows: Rows, options: RunOptions): Row {
  const k = kernel();
  const loan = new Loan("The bench");
  const columnStart = loan.ints(matrix.columnPointers);
  const rowIndex = loan.ints(matrix.rowIndices);
  const symbolic = analysed(k, matrix, columnStart, rowIndex, loan);
  const analysis = k.symbolicBytes(symbolic);
  const values = loan.floats(matrix.values);
  const squares = loan.floats(Float64Array.from({ length: matrix.order }, (_, j) => matrix.values[matrix.columnPointers[j]!]!));
  const factor = k.factorCreate(symbolic);
  const before = k.memoryUsed();
  const numbers = loan.floats(rows.values);
  const plan = k.rowPlanCreate(symbolic, rows.rows, loan.ints(rows.rowPointers), loan.ints(rows.columnIndices));
  const shared = analysis + k.factorBytes(symbolic);
  const ofMatrix = 12 * matrix.values.length + 4 * matrix.order;
  const ofRows = k.memoryUsed() - before + k.orthogonalBytes(plan);
  const done = (result: number): void => {
    if (result !== status.ok) throw new Error(`${family}: status ${result}`);
  };
  const { ours, Cholesky } = measureInTurn(
    {
      ours: {
        run: () => {
          const job = k.orthogonalBegin(factor, plan, numbers, 0, squares);
          done(k.orthogonalAdvance(job, 1e18));
          k.orthogonalRelease(job);
        },
      },
      Cholesky: {
        run: () => {
          k.factorBegin(factor, values);
          done(k.factorAdvance(factor, 1e18));
        },
      },
    },
    options,
  );
  k.rowPlanRelease(plan);
  k.factorRelease(factor);
  k.symbolicRelease(symbolic);
  loan.giveBack();
  return {
    subject: family,
    size,
    measure: "orthogonal",
    ours,
    others: { Cholesky },
    figures: { "rows ÷ unknown": rows.rows / rows.columns },
    targets: [
      atMost("÷ Cholesky", ours.median / Cholesky.median, times[family]),
      atMost("÷ memory", (shared + ofRows) / (shared + ofMatrix), MEMORY),
    ],
  };
}

/** (JᵀJ)⁻¹ e_j at j: a column by the factor, corrected by its residual in double-double until that changes nothing. */
function refinedVariance(rows: WeightedRows, factor: CholeskyFactor, j: number): number {
  let x = factor.inverseColumns([j]);
  const nothing = new Float64Array(rows.jacobian.rows);
  for (let round = 0; round < 10; round += 1) {
    const rest = transposedProduct(rows, residualOf(rows, nothing, x)); // −Jᵀ(J x)
    rest[j]! += 1;
    const correction = factor.solve(rest);
    x = x.map((value, i) => value + correction[i]!);
    if (Math.abs(correction[j]!) < 1e-16 * x[j]!) break;
  }
  return x[j]!;
}

function accuracy(subject: string, size: number, given: Rows): Row {
  const jacobian: SparseColumns = byColumns(given);
  const rows = weightedRows(jacobian, undefined);
  const exact = factorizeRows(jacobian, { route: "orthogonal" });
  const samples = Array.from({ length: SAMPLES }, (_, k) => Math.floor(((k + 0.5) * exact.order) / SAMPLES));
  const truth = samples.map((j) => refinedVariance(rows, exact, j));
  const worst = (found: (j: number) => number) => Math.max(...samples.map((j, k) => Math.abs(found(j) / truth[k]! - 1)));
  const selected = exact.inverseDiagonal();
  const figures: Record<string, number> = {
    "selected inverse": worst((j) => selected[j]!),
    squares: worst((j) => exact.inverseBlock([j])[0]!),
  };
  exact.dispose();
  const chosen = factorizeRows(jacobian);
  const { condition = Number.NaN, route } = chosen.statistics.rows!;
  chosen.dispose();
  try {
    const byMatrix = factorizeRows(jacobian, { route: "information" });
    const diagonal = byMatrix.inverseDiagonal();
    byMatrix.dispose();
    figures["information route"] = worst((j) => diagonal[j]!);
  } catch {
    figures["information route"] = Number.POSITIVE_INFINITY;
  }
  return { subject, size, measure: `accuracy, ${route}`, figures: { condition, ...figures } };
}
