// `sigmatide demo`: how sure is each point of the invented quay network? Worst first.
import { factorize } from "../matrix/factorize.js";
import type { SparseColumns } from "../matrix/sparse-columns.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import { coordinateDifferences, heightDifferences, pillars, points } from "./quay.js";

const AXES = ["east", "north", "height"] as const;
type Axis = (typeof AXES)[number];

/** One row a measured difference: −1 at its start, +1 at its end, nothing at a pillar; its weight is one over its variance. */
function designMatrix(): { jacobian: SparseColumns; weights: number[] } {
  const rowsOf = AXES.flatMap(() => points.map(() => [] as { row: number; sign: number }[]));
  const weights: number[] = [];
  const measure = (axis: Axis, from: string, to: string, sigma: number) => {
    for (const { name, sign } of [
      { name: from, sign: -1 },
      { name: to, sign: 1 },
    ]) {
      if (!pillars.includes(name)) rowsOf[unknownOf(name, axis)]!.push({ row: weights.length, sign });
    }
    weights.push(1 / sigma ** 2);
  };
  for (const leg of coordinateDifferences) for (const axis of AXES) measure(axis, leg.from, leg.to, leg[axis]);
  for (const { from, to, height } of heightDifferences) measure("height", from, to, height);

  const columnPointers = [0];
  for (const rows of rowsOf) columnPointers.push(columnPointers.at(-1)! + rows.length);
  const entries = rowsOf.flat();
  return {
    jacobian: {
      rows: weights.length,
      columns: rowsOf.length,
      columnPointers,
      rowIndices: entries.map(({ row }) => row),
      values: entries.map(({ sign }) => sign),
    },
    weights,
  };
}

const unknownOf = (point: string, axis: Axis): number => AXES.length * points.indexOf(point) + AXES.indexOf(axis);

/** A point and the standard deviations of its coordinates, in millimetres. */
interface PointPrecision {
  point: string;
  east: number;
  north: number;
  height: number;
}

/** The network's points, the one with the largest standard deviation first. The kernel must be loaded. */
export function quayPrecision(): PointPrecision[] {
  const { jacobian, weights } = designMatrix();
  const factor = factorize(SymmetricMatrix.fromNormalEquations(jacobian, weights));
  const deviations = factor.inverseDiagonal().map(Math.sqrt);
  factor.dispose();
  const sigma = (point: string, axis: Axis) => deviations[unknownOf(point, axis)]!;
  const worst = ({ east, north, height }: PointPrecision) => Math.max(east, north, height);
  return points
    .map((point) => ({ point, east: sigma(point, "east"), north: sigma(point, "north"), height: sigma(point, "height") }))
    .sort((a, b) => worst(b) - worst(a));
}

export function printDemo(): string {
  const rows = quayPrecision().map(({ point, east, north, height }) =>
    [point.padEnd(18), ...[east, north, height].map((sigma) => sigma.toFixed(2).padStart(8))].join(""),
  );
  const measured = coordinateDifferences.length * AXES.length + heightDifferences.length;
  return `Kestermouth quay, an invented survey network: ${points.length} points held to ${pillars.length} pillars by ${measured} measured differences.
Standard deviations in millimetres, worst first:

point                 east   north  height
${rows.join("\n")}

These are computed estimates from the stated precision of the measurements. Decisions on structures follow local codes and
a licensed professional.
`;
}
