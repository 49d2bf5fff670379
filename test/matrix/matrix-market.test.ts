// The format's rules: Boisvert, Pozo, Remington, "The Matrix Market Exchange Formats: Initial Design", NISTIR 5935 (1996).
import fc from "fast-check";
import { describe, expect, test } from "vitest";
import { random } from "../../bench/families/random.js";
import { MatrixMarketError, NotSquareError, NotSymmetricError, readMatrixMarket, SymmetricMatrix } from "../../src/index.js";
import { randomDominant, toDense } from "../support/facade.js";

test("the paper's first example, a general 5 × 5 coordinate matrix, reads entry by entry", () => {
  const file = readMatrixMarket(`%%MatrixMarket matrix coordinate real general
% A 5x5 sparse matrix with 8 nonzeros
  5  5  8
    1     1   1.000e+00
    2     2   1.050e+01
    3     3   1.500e-02
    1     4   6.000e+00
    4     2   2.505e+02
    4     4  -2.800e+02
    4     5   3.332e+01
    5     5   1.200e+01
`);
  expect(file).toMatchObject({ rows: 5, columns: 5, symmetric: false });
  expect([...file.columnPointers]).toEqual([0, 1, 3, 4, 6, 8]);
  expect([...file.rowIndices]).toEqual([0, 1, 3, 2, 0, 3, 3, 4]);
  expect([...file.values]).toEqual([1, 10.5, 250.5, 0.015, 6, -280, 33.32, 12]);
});

test("symmetric and general, coordinate and array, real, integer and pattern texts of one matrix give the same", () => {
  const expected = [
    [2, -1, 0],
    [-1, 2, 1],
    [0, 1, 3],
  ];
  const texts = [
    "%%MatrixMarket matrix coordinate real symmetric\n3 3 5\n1 1 2\n2 1 -1\n2 2 2\n3 2 1e0\n3 3 +3.0\n",
    "%%matrixmarket MATRIX Coordinate INTEGER Symmetric\r\n\r\n% a comment\r\n3 3 5\r\n3 3 3\r\n1 1 2\r\n\r\n2 1 -1\r\n3 2 1\r\n2 2 2",
    "%%MatrixMarket matrix coordinate real general\n3 3 7\n1 1 2\n2 1 -1\n1 2 -1\n2 2 2\n3 2 1\n2 3 1\n3 3 3\n",
    "%%MatrixMarket matrix array real general\n3 3\n2\n-1\n0\n-1\n2\n1\n0\n1\n3\n",
    "%%MatrixMarket matrix array integer symmetric\n%\n3 3\n2\n-1\n0\n2\n1\n3\n",
  ];
  for (const text of texts) expect(toDense(SymmetricMatrix.fromMatrixMarket(text))).toEqual(expected);
  const pattern = SymmetricMatrix.fromMatrixMarket("%%MatrixMarket matrix coordinate pattern symmetric\n2 2 3\n1 1\n2 1\n2 2\n");
  expect(toDense(pattern)).toEqual([
    [1, 1],
    [1, 1],
  ]);
});

test("entries at the same place add up; a matrix may have order 0", () => {
  const text = "%%MatrixMarket matrix coordinate real symmetric\n2 2 4\n2 2 5\n1 1 1\n2 2 0.25\n1 1 2\n";
  expect([...SymmetricMatrix.fromMatrixMarket(text).values]).toEqual([3, 5.25]);
  expect(SymmetricMatrix.fromMatrixMarket("%%MatrixMarket matrix coordinate real symmetric\n0 0 0\n").order).toBe(0);
});

test("writing and reading returns every bit", () => {
  const number = fc.oneof(fc.double({ noNaN: true, noDefaultInfinity: true }), fc.constantFrom(-0, 5e-324, Number.MAX_VALUE, 1 / 3));
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 12 }), fc.array(fc.tuple(fc.nat(), fc.nat(), number), { maxLength: 40 }), (order, entries) => {
      const places = new Map(
        entries.map(([a, b, value]) => [`${Math.max(a % order, b % order)} ${Math.min(a % order, b % order)}`, value]),
      );
      const pairs = [...places.keys()].map((key) => key.split(" ").map(Number) as [number, number]);
      const matrix = SymmetricMatrix.fromTriplets(
        order,
        pairs.map(([i]) => i),
        pairs.map(([, j]) => j),
        [...places.values()],
      );
      const again = SymmetricMatrix.fromMatrixMarket(matrix.toMatrixMarket());
      expect(again.columnPointers).toEqual(matrix.columnPointers);
      expect(again.rowIndices).toEqual(matrix.rowIndices);
      expect([...again.values].every((value, k) => Object.is(value, matrix.values[k]))).toBe(true);
    }),
  );
  const large = randomDominant(3000, 8, random(4).uniform);
  expect(SymmetricMatrix.fromMatrixMarket(large.toMatrixMarket()).values).toEqual(large.values);
});

const banner = "%%MatrixMarket matrix coordinate real symmetric\n";
const malformed: [name: string, text: string, line: number, expected: RegExp][] = [
  ["nothing", "", 1, /%%matrixmarket/],
  ["another banner", "%%MatrixMart matrix coordinate real general\n", 1, /%%matrixmarket/],
  ["another object", "%%MatrixMarket vector coordinate real general\n", 1, /the object in the banner: matrix/],
  ["an unknown format", "%%MatrixMarket matrix sparse real general\n", 1, /coordinate or array/],
  ["complex numbers", "%%MatrixMarket matrix coordinate complex symmetric\n", 1, /real or integer or pattern/],
  ["a pattern as an array", "%%MatrixMarket matrix array pattern general\n", 1, /real or integer$/],
  ["a skew-symmetric matrix", "%%MatrixMarket matrix coordinate real skew-symmetric\n", 1, /general or symmetric/],
  ["a banner with more words", "%%MatrixMarket matrix coordinate real symmetric upper\n", 1, /the end of the line after the banner/],
  ["no size line", `${banner}% only a comment\n\n`, 4, /the size line/],
  ["a size that is no number", `${banner}three 3 1\n`, 2, /the number of rows/],
  ["a size line too short", `${banner}3 3\n`, 2, /the number of entries/],
  ["a size line too long", `${banner}3 3 1 1\n`, 2, /the end of the line after the size line/],
  ["a symmetric matrix that is not square", `${banner}3 2 1\n1 1 1\n`, 2, /as many columns as rows/],
  ["a row beyond the size", `${banner}3 3 1\n4 1 1\n`, 3, /a row index, a whole number from 1 to 3/],
  ["a column of zero", `${banner}3 3 1\n1 0 1\n`, 3, /a column index, a whole number from 1 to 3/],
  ["a negative index", `${banner}3 3 1\n-1 1 1\n`, 3, /a row index/],
  ["a fractional index", `${banner}3 3 1\n1.5 1 1\n`, 3, /a row index/],
  ["an entry above the diagonal", `${banner}3 3 2\n1 1 1\n% here\n2 3 1\n`, 5, /an entry of the lower triangle/],
  ["an entry without its value", `${banner}3 3 1\n1 1\n`, 3, /a finite number/],
  ["a value that is a word", `${banner}3 3 1\n1 1 nan\n`, 3, /a finite number/],
  ["an infinite value", `${banner}3 3 1\n1 1 -Infinity\n`, 3, /a finite number/],
  ["a value past the largest number", `${banner}3 3 1\n1 1 1e999\n`, 3, /a finite number/],
  ["a hexadecimal value", `${banner}3 3 1\n1 1 0x10\n`, 3, /a finite number/],
  ["a fraction where the banner says integer", "%%MatrixMarket matrix coordinate integer general\n1 1 1\n1 1 1.5\n", 3, /a whole number/],
  ["an entry with a number too many", `${banner}3 3 1\n1 1 1 1\n`, 3, /the end of the line after the entry/],
  ["fewer entries than promised", `${banner}3 3 3\n1 1 1\n2 2 1\n`, 5, /entry 3 of 3/],
  ["more entries than promised", `${banner}3 3 1\n1 1 1\n2 2 1\n`, 4, /the end of the text after 1 entries/],
  ["a promise of two billion entries", `${banner}3 3 2000000000\n1 1 1\n`, 4, /entry 2 of 2000000000/],
  ["an array cut short", "%%MatrixMarket matrix array real general\n2 2\n1\n2\n3\n", 6, /value 4 of 4/],
  ["an array row by row", "%%MatrixMarket matrix array real general\n2 2\n1 2\n3 4\n", 3, /the end of the line after the value/],
];

describe("a malformed text is refused with its line and what was expected there:", () => {
  for (const [name, text, line, expected] of malformed) {
    test(name, () => {
      let error: unknown;
      try {
        readMatrixMarket(text);
      } catch (thrown) {
        error = thrown;
      }
      expect(error).toBeInstanceOf(MatrixMarketError);
      const { message, details } = error as MatrixMarketError;
      expect(details).toMatchObject({ line });
      expect(details.expected).toMatch(expected);
      expect(message).toMatch(new RegExp(`^Line ${line}: expected .*, found .`));
    });
  }
});

test("a general text that is rectangular, or not symmetric, is refused as a symmetric matrix", () => {
  const general = "%%MatrixMarket matrix coordinate real general\n";
  expect(() => SymmetricMatrix.fromMatrixMarket(`${general}3 2 1\n1 1 1\n`)).toThrowError(NotSquareError);
  expect(() => SymmetricMatrix.fromMatrixMarket(`${general}2 2 3\n1 1 1\n2 1 5\n2 2 1\n`)).toThrowError(NotSymmetricError);
});
