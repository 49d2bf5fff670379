/** Orthogonal triangularization of a staircase of rows by Householder reflections in strips of four, the reflections not kept.
 *
 *  a: rows one after another, `ld` entries apart, ld even and at least columns + carried. Entries 0 … columns − 1 of a row are its
 *  matrix part; what follows up to ld (right-hand sides; zeros to an even length) is carried along.
 *  Rows are sorted by where they begin: ends i32[columns], ends[j] = rows that are not zero in columns 0 … j, never falling. Where a row
 *  has not begun it holds zeros.
 *  Columns [first, to) are worked on, `first` a multiple of four, to one too or all of them; `done` rows were finished before (0 at first).
 *  Returns how many are finished now. Finished row i is row i of R: it begins at column leads[i] (i32, ascending), its entries before
 *  that are without meaning. A column in which no unfinished row has an entry gives no row. After the last column, what a row that is
 *  not finished carries is what of the right-hand side no unknown explains.
 *  scratch: householderScratch(rows) bytes. Squares of entries must neither overflow nor vanish (orthogonal.ts scales columns).
 *  Cost 4·(active rows)·(ld − column) flops a column, active rows being those begun and not finished: zeros of the staircase below
 *  the strip at hand cost nothing.
 *
 *  Rows of very different size keep their own accuracy: a row whose entry in the column is the largest, or near it, is brought to the
 *  pivot's place, and the sign of a reflection is the one that adds (v₀ = x₀ + sign(x₀)·‖x‖), so a diagonal of R may be negative.
 *  With V the vectors of a strip, H₁H₂H₃H₄ = I − V T Vᵀ, T upper triangular, its diagonal 2 ÷ ‖v‖². One pass over the strip a column
 *  carries out the reflection before and sums what the next one needs; then four columns of what follows at a time are reflected in
 *  registers, by one pass for Vᵀ times them and one for the update.
 *  Sources: Schreiber, Van Loan (1989), "A Storage-Efficient WY Representation for Products of Householder Transformations", SIAM J.
 *  Sci. Stat. Comput. 10(1); Golub, Van Loan, Matrix Computations, section 5.2; rows of different size: Powell, Reid (1969), "On
 *  applying Householder transformations to linear least squares problems", Proc. IFIP Congress 1968; Cox, Higham (1998), "Stability of
 *  Householder QR Factorization for Weighted Least Squares Problems"; the staircase: George, Liu (1987), "Householder reflections
 *  versus Givens rotations in sparse orthogonal decomposition", Linear Algebra Appl. 88/89. */
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { madd, nmadd } from "./madd";
import { bytes } from "./mode";

/** A row stays in the pivot's place while its entry is at least this share of the column's largest: the accuracy of small rows is bounded
 *  by the reciprocal, and most exchanges are saved. */
const SMALL = 0.125;

/** T, row-major 4 × 4; the strip's own columns of R, a row of four each; xᵀ times the strip, for the column x at hand, and the row that
 *  holds its largest entry; what the reflection before takes away from a row for each unit of its entry there. */
const t = memory.data(128, 16);
const corner = memory.data(128, 16);
const sums = memory.data(32, 16);
const best = memory.data(4, 4);
const weights = memory.data(32, 16);

/** Bytes of scratch: four vectors. */
export function householderScratch(rows: i32): usize { return <usize>rows << 5; }

// @ts-ignore: decorator
@inline function swapPairs(p: usize, q: usize, end: usize): void {
  for (; p < end; p += 16, q += 16) {
    const u = v128.load(p);
    v128.store(p, v128.load(q));
    v128.store(q, u);
  }
}

/** Entry q of a row of four, in both lanes. */
// @ts-ignore: decorator
@inline function lane(q: i32, low: v128, high: v128): v128 {
  if (q == 0) return v128.shuffle<f64>(low, low, 0, 0);
  if (q == 1) return v128.shuffle<f64>(low, low, 1, 1);
  if (q == 2) return v128.shuffle<f64>(high, high, 0, 0);
  return v128.shuffle<f64>(high, high, 1, 1);
}

// @ts-ignore: decorator
@inline function entryOf(q: i32, low: v128, high: v128): f64 {
  if (q == 0) return f64x2.extract_lane(low, 0);
  if (q == 1) return f64x2.extract_lane(low, 1);
  if (q == 2) return f64x2.extract_lane(high, 0);
  return f64x2.extract_lane(high, 1);
}

/** One row of the strip in passColumn: gathered from `from` for q = 0, else relieved of (entry q − 1) × w; then kept at p. */
// @ts-ignore: decorator
@inline function rowLow(q: i32, p: usize, from: usize, w: v128): v128 {
  if (q == 0) {
    const low = v128.load(from);
    v128.store(p, low);
    return low;
  }
  let low = v128.load(p);
  if (q == 1) { low = nmadd(lane(0, low, low), w, low); v128.store(p, low); }
  return low;
}
// @ts-ignore: decorator
@inline function rowHigh(q: i32, p: usize, from: usize, before: v128, w: v128): v128 {
  if (q == 0) {
    const high = v128.load(from, 16);
    v128.store(p, high, 16);
    return high;
  }
  let high = v128.load(p, 16);
  high = nmadd(q < 3 ? lane(q - 1, before, before) : lane(2, high, high), w, high);
  v128.store(p, high, 16);
  return high;
}

/** The strip's rows p … end: takes away (entry q − 1) × w, or for q = 0 gathers them from rows that lie `row` bytes apart; then sums
 *  (entry q) × row. Returns the largest |entry q|; `best` gets its row (found without a branch: where it lies is anybody's guess). */
// @ts-ignore: decorator
@inline function passColumn(q: i32, p: usize, end: usize, from: usize, row: usize, w0: v128, w1: v128): f64 {
  let s0 = f64x2.splat(0), s1 = s0, largest = s0, at = i64x2.splat(p), here = at;
  const next = i64x2.splat(32);
  for (; p < end; p += 32, from += row) {
    const before = v128.load(p), low = rowLow(q, p, from, w0), high = rowHigh(q, p, from, before, w1), x = lane(q, low, high);
    s0 = madd(x, low, s0);
    s1 = madd(x, high, s1);
    const size = f64x2.abs(x), isLarger = f64x2.gt(size, largest);
    largest = f64x2.pmax(largest, size);
    at = v128.bitselect(here, at, isLarger);
    here = i64x2.add(here, next);
  }
  v128.store(sums, s0);
  v128.store(sums, s1, 16);
  store<u32>(best, i32x4.extract_lane(at, 0));
  return f64x2.extract_lane(largest, 0);
}

/** Column q of a strip whose `r` first rows are finished: the reflection before is carried out on it, its own one found, its row of R kept.
 *  Returns the rows finished now. Parameters as in reduceStrip. */
// @ts-ignore: decorator
@inline function reduceColumn(
  q: i32, r: i32, ends: usize, base: i32, v: usize, end: usize, from: usize, strideFrom: usize, a: usize, row: usize, after: usize, leads: usize, column: i32,
): i32 {
  const pivot = v + (<usize>r << 5), largest = passColumn(q, pivot, end, from, strideFrom, v128.load(weights), v128.load(weights, 16));
  if (q < 3) { v128.store(weights, f64x2.splat(0)); v128.store(weights, f64x2.splat(0), 16); }
  if (largest == 0) return r;
  if (Math.abs(f64At(pivot, q)) < SMALL * largest) {
    const other = load<u32>(best), into = a + (other - v >> 5) * row, own = a + <usize>r * row;
    swapPairs(pivot, other, pivot + 32);
    swapPairs(own + after, into + after, own + row);
  }
  const kept = corner + (<usize>r << 5), p0 = v128.load(pivot), p1 = v128.load(pivot, 16);
  let v0 = 0.0;
  if (i32At(ends, q) - base - r > 1) {
    // v = x with σ‖x‖ added to its first entry, so vᵀ times the strip is the sums plus that times the pivot's row.
    const s0 = v128.load(sums), s1 = v128.load(sums, 16), x0 = entryOf(q, p0, p1), norm = Math.sqrt(entryOf(q, s0, s1));
    const added = copysign<f64>(norm, x0), tau = 1 / (norm * (norm + Math.abs(x0)));
    const lift = f64x2.splat(added), z0 = madd(lift, p0, s0), z1 = madd(lift, p1, s1), by = f64x2.splat(tau);
    v0 = x0 + added;
    const first = f64x2.splat(v0);
    // The columns up to q stay.
    if (q == 0) {
      const w0 = f64x2.replace_lane(f64x2.mul(by, z0), 0, 0), w1 = f64x2.mul(by, z1);
      v128.store(weights, w0);
      v128.store(weights, w1, 16);
      v128.store(kept, f64x2.replace_lane(nmadd(first, w0, p0), 0, -added));
      v128.store(kept, nmadd(first, w1, p1), 16);
    } else if (q == 1) {
      const w1 = f64x2.mul(by, z1);
      v128.store(weights, w1, 16);
      setF64(kept, 1, -added);
      v128.store(kept, nmadd(first, w1, p1), 16);
    } else if (q == 2) {
      const w1 = f64x2.replace_lane(f64x2.mul(by, z1), 0, 0);
      v128.store(weights, w1, 16);
      v128.store(kept, f64x2.replace_lane(nmadd(first, w1, p1), 0, -added), 16);
    } else setF64(kept, 3, -added);
    // Column q of T: τ on the diagonal, above it −τ T Vᵀv, and z holds v's products with the vectors before it.
    setF64(t, 5 * q, tau);
    if (q > 0) {
      const g0 = entryOf(0, z0, z1), g1 = entryOf(1, z0, z1), g2 = entryOf(2, z0, z1);
      let c0 = f64At(t, 0) * g0;
      if (q > 1) c0 += f64At(t, 1) * g1;
      if (q > 2) c0 += f64At(t, 2) * g2;
      setF64(t, q, -tau * c0);
      if (q > 1) {
        let c1 = f64At(t, 5) * g1;
        if (q > 2) c1 += f64At(t, 6) * g2;
        setF64(t, 4 + q, -tau * c1);
      }
      if (q > 2) setF64(t, 11, -tau * f64At(t, 10) * g2);
    }
  } else {
    v128.store(kept, p0);
    v128.store(kept, p1, 16);
  }
  setF64(pivot, q, v0);
  if (q < 1) setF64(pivot, 1, 0);
  if (q < 2) v128.store(pivot, f64x2.splat(0), 16);
  else if (q < 3) setF64(pivot, 3, 0);
  setI32(leads, r, column + q);
  return r + 1;
}

/** Triangularizes four columns (or the last few, the rest zeros), gathered into v, rows of four up to `end`, from rows `strideFrom` bytes apart;
 *  v becomes V, T and the corner are set. ends i32[cols], base: rows of a finished before; rows are exchanged in `a` too (its first
 *  unfinished row), from the byte `after` of a row on. leads[i] becomes the column, the strip's first being `column`, of its row i.
 *  Returns the rows finished. A finished row's later entries in v are zeros, so each column of V begins at its own pivot. */
function reduceStrip(
  cols: i32, ends: usize, base: i32, v: usize, end: usize, from: usize, strideFrom: usize, a: usize, row: usize, after: usize, leads: usize, column: i32,
): i32 {
  for (let k: usize = 0; k < 128; k += 16) v128.store(t + k, f64x2.splat(0));
  let r = reduceColumn(0, 0, ends, base, v, end, from, strideFrom, a, row, after, leads, column);
  if (cols > 1) r = reduceColumn(1, r, ends, base, v, end, 0, 0, a, row, after, leads, column);
  if (cols > 2) r = reduceColumn(2, r, ends, base, v, end, 0, 0, a, row, after, leads, column);
  if (cols > 3) r = reduceColumn(3, r, ends, base, v, end, 0, 0, a, row, after, leads, column);
  return r;
}

/** w := w + low·v and u := u + high·v for entry q of V's row at p; with PAIR there is no high. */
// @ts-ignore: decorator
@inline function addTo(w: v128, c: v128, p: usize, q: usize): v128 { return madd(c, v128.load64_splat(p + (q << 3)), w); }
// @ts-ignore: decorator
@inline function takeFrom(c: v128, w: v128, p: usize, q: usize): v128 { return nmadd(w, v128.load64_splat(p + (q << 3)), c); }
// @ts-ignore: decorator
@inline function times(w: v128, k: usize): v128 { return f64x2.mul(w, v128.load64_splat(t + (k << 3))); }
// @ts-ignore: decorator
@inline function plus(w: v128, from: v128, k: usize): v128 { return madd(from, v128.load64_splat(t + (k << 3)), w); }

/** Two columns of the rows at c: c := c − V Tᵀ Vᵀ c. With FULL the first four rows of V are a triangle. */
// @ts-ignore: decorator
@inline function reflectPair(FULL: bool, v: usize, end: usize, c: usize, row: usize): void {
  let w0 = f64x2.splat(0), w1 = w0, w2 = w0, w3 = w0, p = v, at = c;
  if (FULL) {
    w0 = addTo(w0, v128.load(at), p, 0);
    at += row; p += 32;
    let x = v128.load(at);
    w0 = addTo(w0, x, p, 0); w1 = addTo(w1, x, p, 1);
    at += row; p += 32;
    x = v128.load(at);
    w0 = addTo(w0, x, p, 0); w1 = addTo(w1, x, p, 1); w2 = addTo(w2, x, p, 2);
    at += row; p += 32;
    x = v128.load(at);
    w0 = addTo(w0, x, p, 0); w1 = addTo(w1, x, p, 1); w2 = addTo(w2, x, p, 2); w3 = addTo(w3, x, p, 3);
    at += row; p += 32;
  }
  for (; p < end; p += 32, at += row) {
    const x = v128.load(at);
    w0 = addTo(w0, x, p, 0); w1 = addTo(w1, x, p, 1); w2 = addTo(w2, x, p, 2); w3 = addTo(w3, x, p, 3);
  }
  w3 = plus(plus(plus(times(w3, 15), w0, 3), w1, 7), w2, 11);
  w2 = plus(plus(times(w2, 10), w0, 2), w1, 6);
  w1 = plus(times(w1, 5), w0, 1);
  w0 = times(w0, 0);
  p = v; at = c;
  if (FULL) {
    v128.store(at, takeFrom(v128.load(at), w0, p, 0));
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1));
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2));
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2), w3, p, 3));
    at += row; p += 32;
  }
  for (; p < end; p += 32, at += row)
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2), w3, p, 3));
}

/** The same for four columns. */
// @ts-ignore: decorator
@inline function reflectFour(FULL: bool, v: usize, end: usize, c: usize, row: usize): void {
  let w0 = f64x2.splat(0), w1 = w0, w2 = w0, w3 = w0, u0 = w0, u1 = w0, u2 = w0, u3 = w0, p = v, at = c;
  if (FULL) {
    let x = v128.load(at), y = v128.load(at, 16);
    w0 = addTo(w0, x, p, 0); u0 = addTo(u0, y, p, 0);
    at += row; p += 32;
    x = v128.load(at); y = v128.load(at, 16);
    w0 = addTo(w0, x, p, 0); u0 = addTo(u0, y, p, 0);
    w1 = addTo(w1, x, p, 1); u1 = addTo(u1, y, p, 1);
    at += row; p += 32;
    x = v128.load(at); y = v128.load(at, 16);
    w0 = addTo(w0, x, p, 0); u0 = addTo(u0, y, p, 0);
    w1 = addTo(w1, x, p, 1); u1 = addTo(u1, y, p, 1);
    w2 = addTo(w2, x, p, 2); u2 = addTo(u2, y, p, 2);
    at += row; p += 32;
    x = v128.load(at); y = v128.load(at, 16);
    w0 = addTo(w0, x, p, 0); u0 = addTo(u0, y, p, 0);
    w1 = addTo(w1, x, p, 1); u1 = addTo(u1, y, p, 1);
    w2 = addTo(w2, x, p, 2); u2 = addTo(u2, y, p, 2);
    w3 = addTo(w3, x, p, 3); u3 = addTo(u3, y, p, 3);
    at += row; p += 32;
  }
  for (; p < end; p += 32, at += row) {
    const x = v128.load(at), y = v128.load(at, 16);
    w0 = addTo(w0, x, p, 0); u0 = addTo(u0, y, p, 0);
    w1 = addTo(w1, x, p, 1); u1 = addTo(u1, y, p, 1);
    w2 = addTo(w2, x, p, 2); u2 = addTo(u2, y, p, 2);
    w3 = addTo(w3, x, p, 3); u3 = addTo(u3, y, p, 3);
  }
  w3 = plus(plus(plus(times(w3, 15), w0, 3), w1, 7), w2, 11);
  u3 = plus(plus(plus(times(u3, 15), u0, 3), u1, 7), u2, 11);
  w2 = plus(plus(times(w2, 10), w0, 2), w1, 6);
  u2 = plus(plus(times(u2, 10), u0, 2), u1, 6);
  w1 = plus(times(w1, 5), w0, 1);
  u1 = plus(times(u1, 5), u0, 1);
  w0 = times(w0, 0);
  u0 = times(u0, 0);
  p = v; at = c;
  if (FULL) {
    v128.store(at, takeFrom(v128.load(at), w0, p, 0));
    v128.store(at, takeFrom(v128.load(at, 16), u0, p, 0), 16);
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1));
    v128.store(at, takeFrom(takeFrom(v128.load(at, 16), u0, p, 0), u1, p, 1), 16);
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2));
    v128.store(at, takeFrom(takeFrom(takeFrom(v128.load(at, 16), u0, p, 0), u1, p, 1), u2, p, 2), 16);
    at += row; p += 32;
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2), w3, p, 3));
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at, 16), u0, p, 0), u1, p, 1), u2, p, 2), u3, p, 3), 16);
    at += row; p += 32;
  }
  for (; p < end; p += 32, at += row) {
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at), w0, p, 0), w1, p, 1), w2, p, 2), w3, p, 3));
    v128.store(at, takeFrom(takeFrom(takeFrom(takeFrom(v128.load(at, 16), u0, p, 0), u1, p, 1), u2, p, 2), u3, p, 3), 16);
  }
}

function reflectRows(isFull: bool, v: usize, end: usize, c: usize, row: usize, columns: i32): void {
  if (isFull) {
    for (; columns >= 4; columns -= 4, c += 32) reflectFour(true, v, end, c, row);
    if (columns) reflectPair(true, v, end, c, row);
  } else {
    for (; columns >= 4; columns -= 4, c += 32) reflectFour(false, v, end, c, row);
    if (columns) reflectPair(false, v, end, c, row);
  }
}

export function triangularize(
  columns: i32, a: usize, ld: i32, ends: usize, first: i32, to: i32, done: i32, leads: usize, scratch: usize,
): i32 {
  assert((ld & 1) == 0 && ld >= columns && (first & 3) == 0, "rows of even length, strips of four");
  const row = bytes(ld), v = scratch;
  for (let j = first; j < to; j += 4) {
    const cols = min(4, columns - j), len = i32At(ends, j + cols - 1) - done;
    if (len <= 0) continue;
    const top = a + <usize>done * row, end = v + (<usize>len << 5);
    let from = top + bytes(j), strideFrom = row;
    if (cols < 4) { // the carried part begins here: zeros in its place
      for (let p = v; p < end; p += 32, from += row) for (let q = 0; q < 4; ++q) setF64(p, q, q < cols ? f64At(from, q) : 0);
      from = v;
      strideFrom = 32;
    }
    // Whole pairs of columns are exchanged and reflected: what lies in the strip itself is written afterwards.
    const after = j + cols & ~1;
    const rows = reduceStrip(cols, ends + (<usize>j << 2), done, v, end, from, strideFrom, top, row, bytes(after), leads + (<usize>done << 2), j);
    if (f64At(t, 0) != 0 || f64At(t, 5) != 0 || f64At(t, 10) != 0 || f64At(t, 15) != 0)
      reflectRows(rows == 4, v, end, top + bytes(after), row, ld - after);
    for (let i = 0; i < rows; ++i) {
      const into = top + <usize>i * row + bytes(j);
      for (let q = 0; q < cols; ++q) setF64(into, q, f64At(corner, 4 * i + q));
    }
    done += rows;
  }
  return done;
}
