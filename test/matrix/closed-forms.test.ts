// Factor, inverse and determinant against closed forms. Inverses of these matrices are known exactly, so errors are ours alone:
// they stay below c · κ · ε, with κ the condition of the matrix as each test states it (Higham, "Accuracy and Stability of Numerical
// Algorithms", 2002, thm. 10.4 and ch. 14).
import { beforeAll, describe, expect, test } from "vitest";
import { factorize, SymmetricMatrix } from "../../src/index.js";
import { initFacade } from "../support/facade.js";
import { orderings } from "../support/random-matrices.js";
import { type Graph, gridGraph, heldLaplacian, resistances } from "../support/resistors.js";

beforeAll(initFacade);

const epsilon = 2 ** -52;
const close = (found: number, truth: number, bound: number): void =>
  expect(Math.abs(found - truth)).toBeLessThanOrEqual(bound * Math.abs(truth));

describe.each(orderings)("order: %s", (ordering) => {
  test("second differences [−1 2 −1]: inverse min (n + 1 − max) / (n + 1), determinant n + 1 (Meurant 1992)", () => {
    const n = 1000;
    const matrix = SymmetricMatrix.fromTriplets(
      n,
      [...Array(n).keys(), ...Array(n - 1).keys()].map((k, at) => (at < n ? k : k + 1)),
      [...Array(n).keys(), ...Array(n - 1).keys()],
      Array.from({ length: 2 * n - 1 }, (_, k) => (k < n ? 2 : -1)),
    );
    const factor = factorize(matrix, { ordering });
    const truth = (i: number, j: number): number => ((Math.min(i, j) + 1) * (n - Math.max(i, j))) / (n + 1);
    // κ = 4 (n + 1)² / π².
    const bound = ((4 * (n + 1) ** 2) / Math.PI ** 2) * epsilon;
    const diagonal = factor.inverseDiagonal();
    for (let i = 0; i < n; i += 1) close(diagonal[i]!, truth(i, i), bound);
    const chosen = [0, 17, 499, 998];
    const columns = factor.inverseColumns(chosen);
    for (const [c, j] of chosen.entries()) for (let i = 0; i < n; i += 1) close(columns[c * n + i]!, truth(i, j), bound);
    const entries = factor.inverseEntries([2, 996, 500], [996, 2, 500]);
    for (const [k, [i, j]] of (
      [
        [2, 996],
        [996, 2],
        [500, 500],
      ] as const
    ).entries())
      close(entries[k]!, truth(i, j), bound);
    const selected = factor.selectedInverse();
    for (let j = 0; j < n; j += 1)
      for (let p = selected.columnPointers[j]!; p < selected.columnPointers[j + 1]!; p += 1)
        close(selected.values[p]!, truth(selected.rowIndices[p]!, j), bound);
    // The last pivots of some orders are as small as 1 / n by cancellation: errors in their logarithms up to κ ε.
    expect(Math.abs(factor.logDeterminant() - Math.log(n + 1))).toBeLessThan(bound);
    factor.dispose();
  });

  test("first-order autoregression: covariance ρ^|i − j|, determinant (1 − ρ²)^(1 − n) (Kac, Murdock, Szegő 1953)", () => {
    const [n, rho] = [200, 0.9];
    const scale = 1 / (1 - rho * rho);
    const matrix = SymmetricMatrix.fromTriplets(
      n,
      [...Array(n).keys(), ...Array(n - 1).keys()].map((k, at) => (at < n ? k : k + 1)),
      [...Array(n).keys(), ...Array(n - 1).keys()],
      Array.from({ length: 2 * n - 1 }, (_, k) => (k >= n ? -rho * scale : k === 0 || k === n - 1 ? scale : (1 + rho * rho) * scale)),
    );
    const factor = factorize(matrix, { ordering });
    // κ ≤ ((1 + ρ) / (1 − ρ))² = 361; the entries of the matrix are themselves rounded.
    const bound = 361 * 8 * epsilon;
    for (const v of factor.inverseDiagonal()) close(v, 1, bound);
    const columns = factor.inverseColumns([100]);
    for (let i = 0; i < n; i += 1) expect(Math.abs(columns[i]! - rho ** Math.abs(i - 100))).toBeLessThan(bound);
    close(factor.logDeterminant(), (n - 1) * Math.log(scale), 16 * epsilon);
    factor.dispose();
  });

  test("cycle of 100: resistance k (n − k) / n, n spanning trees (Klein, Randić 1993; Kirchhoff 1847)", () => {
    const n = 100;
    const graph: Graph = { vertices: n, edges: Array.from({ length: n }, (_, k) => [k, (k + 1) % n]) };
    const factor = factorize(heldLaplacian(graph), { ordering });
    const pairs = Array.from({ length: n - 1 }, (_, k) => [(3 * k) % n, (3 * k + k + 1) % n] as const);
    // κ ≈ 4 n² / π²; R is a difference of entries at most n / R ≤ 100 times larger.
    const bound = ((4 * n * n) / Math.PI ** 2) * 10 * epsilon;
    for (const [k, found] of resistances(factor, pairs).entries()) close(found, ((k + 1) * (n - k - 1)) / n, bound);
    close(factor.logDeterminant(), Math.log(n), 4 * n * epsilon);
    factor.dispose();
  });

  test("complete graph of 50: resistance 2 / n, n^(n − 2) spanning trees (Cayley 1889)", () => {
    const n = 50;
    const edges = Array.from({ length: n * n }, (_, k) => [Math.floor(k / n), k % n] as const).filter(([a, b]) => a < b);
    const factor = factorize(heldLaplacian({ vertices: n, edges }), { ordering });
    // κ = n; n rounding errors a sum.
    for (const found of resistances(factor, edges)) close(found, 2 / n, n * 8 * epsilon);
    close(factor.logDeterminant(), (n - 2) * Math.log(n), n * epsilon);
    factor.dispose();
  });

  test.each([
    // OEIS A007341 for the tree counts; resistances by the double cosine sum of Wu (2004), 20 digits computed there.
    { rows: 4, columns: 4, corner: 13 / 7, logTrees: Math.log(100352) },
    { rows: 10, columns: 10, corner: 3.011669564896535, logTrees: 98.44804291763762 },
    { rows: 30, columns: 30, corner: 4.40815287481106, logTrees: 995.6389676411329 },
  ])("grid $rows × $columns: corner to corner, and the number of spanning trees", ({ rows, columns, corner, logTrees }) => {
    const factor = factorize(heldLaplacian(gridGraph(rows, columns)), { ordering });
    // κ of a held grid is below 8 · vertices · log(vertices).
    const bound = 8 * rows * columns * Math.log(rows * columns) * epsilon;
    close(resistances(factor, [[0, rows * columns - 1]])[0]!, corner, bound);
    close(factor.logDeterminant(), logTrees, rows * columns * epsilon);
    factor.dispose();
  });

  test("grid 12 × 9: every edge and random pairs by the double cosine sum (Wu 2004)", () => {
    const [rows, columns] = [12, 9];
    const graph = gridGraph(rows, columns);
    const factor = factorize(heldLaplacian(graph), { ordering });
    const pairs: (readonly [number, number])[] = [...graph.edges, [3, 100], [17, 18], [0, 107], [50, 59]];
    const bound = 8 * rows * columns * Math.log(rows * columns) * epsilon;
    for (const [k, found] of resistances(factor, pairs).entries()) close(found, gridResistance(rows, columns, ...pairs[k]!), bound);
    factor.dispose();
  });

  test.each([
    { order: 4, digits: 12 },
    { order: 6, digits: 9 },
    { order: 8, digits: 6 },
  ])("Hilbert matrix of order $order: its inverse to $digits digits (Choi 1983)", ({ order, digits }) => {
    // κ = 1.5e4, 1.5e7, 1.5e10 loses so many of sixteen digits; the entries 1 / (i + j + 1) themselves are rounded.
    const [rows, columns, values]: [number[], number[], number[]] = [[], [], []];
    for (let i = 0; i < order; i += 1) {
      for (let j = 0; j <= i; j += 1) {
        rows.push(i);
        columns.push(j);
        values.push(1 / (i + j + 1));
      }
    }
    const factor = factorize(SymmetricMatrix.fromTriplets(order, rows, columns, values), { ordering });
    const found = factor.inverseColumns([...Array(order).keys()]);
    for (let j = 0; j < order; j += 1)
      for (let i = 0; i < order; i += 1) close(found[i + order * j]!, hilbertInverse(order, i, j), 10 ** -digits);
    factor.dispose();
  });

  test("nine-point star on 30 × 30, 9 I − E ⊗ E: determinant and trace of the inverse by eigenvalues 9 − c c' (Kronecker structure)", () => {
    const n = 30;
    const [rows, columns, values]: [number[], number[], number[]] = [[], [], []];
    for (let a = 0; a < n * n; a += 1) {
      for (let b = 0; b <= a; b += 1) {
        const [di, dj] = [Math.floor(a / n) - Math.floor(b / n), Math.abs((a % n) - (b % n))];
        if (di > 1 || dj > 1) continue;
        rows.push(a);
        columns.push(b);
        values.push(a === b ? 8 : -1);
      }
    }
    const factor = factorize(SymmetricMatrix.fromTriplets(n * n, rows, columns, values), { ordering });
    const c = Array.from({ length: n }, (_, k) => 1 + 2 * Math.cos((Math.PI * (k + 1)) / (n + 1)));
    const eigenvalues = c.flatMap((p) => c.map((q) => 9 - p * q));
    // κ = largest ÷ smallest eigenvalue, about 400.
    const bound = (Math.max(...eigenvalues) / Math.min(...eigenvalues)) * 4 * epsilon;
    close(
      factor.logDeterminant(),
      eigenvalues.reduce((sum, v) => sum + Math.log(v), 0),
      n * n * epsilon,
    );
    const trace = factor.inverseDiagonal().reduce((sum, v) => sum + v, 0);
    close(
      trace,
      eigenvalues.reduce((sum, v) => sum + 1 / v, 0),
      bound,
    );
    const [first, middle] = factor.inverseEntries([0, 434], [0, 434]);
    close(first!, 0.13593598870398146, bound);
    close(middle!, 0.26427632224642555, bound);
    factor.dispose();
  });
});

/** Effective resistance of a rows × columns grid of unit resistors with free borders: Σ over nonzero modes of (ψ(a) − ψ(b))² / λ. */
function gridResistance(rows: number, columns: number, a: number, b: number): number {
  const mode = (length: number, frequency: number, at: number): number =>
    Math.sqrt((frequency === 0 ? 1 : 2) / length) * Math.cos((Math.PI * frequency * (at + 0.5)) / length);
  let sum = 0;
  for (let f = 0; f < rows; f += 1) {
    for (let g = 0; g < columns; g += 1) {
      if (f + g === 0) continue;
      const eigenvalue = 4 - 2 * Math.cos((Math.PI * f) / rows) - 2 * Math.cos((Math.PI * g) / columns);
      const psi = (k: number): number => mode(rows, f, Math.floor(k / columns)) * mode(columns, g, k % columns);
      sum += (psi(a) - psi(b)) ** 2 / eigenvalue;
    }
  }
  return sum;
}

function hilbertInverse(n: number, i: number, j: number): number {
  const choose = (a: number, b: number): number => {
    let c = 1;
    for (let k = 1; k <= b; k += 1) c = (c * (a - b + k)) / k;
    return c;
  };
  const sign = (i + j) % 2 === 0 ? 1 : -1;
  return sign * (i + j + 1) * choose(n + i, n - j - 1) * choose(n + j, n - i - 1) * choose(i + j, i) ** 2;
}
