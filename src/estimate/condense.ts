// The information of a whole network on a few of its states: what the parts of a divided network hand to one another.
import { factorize } from "../matrix/factorize.js";
import { SymmetricMatrix } from "../matrix/symmetric-matrix.js";
import { assembleInformation } from "./information.js";
import { timesRows } from "./null-space.js";
import type { WhitenedRows } from "./whitened.js";

/** Columns solved together: enough for the dense kernels, few enough to be small beside the factor. */
const COLUMNS = 32;

/** Information on some states, whatever the others are. */
export interface Condensed {
  /** Λ_kk − Λ_ki Λ_ii⁻¹ Λ_ik, K × K, row-major, K = unknowns kept. */
  readonly information: Float64Array;
  /** η_k − Λ_ki Λ_ii⁻¹ η_i, length K. */
  readonly vector: Float64Array;
}

/**
 * Condenses the information of `rows` on `states` to those in `keep` (a Schur complement), in the order of `keep`.
 * Two condensed parts of a network that share the states kept add up to the condensed whole (Helmert blocking; common practice, no source).
 * @throws {NotPositiveDefiniteError} the other states are not determined given those kept.
 * Cost: a factorization of the others and K + 1 solves.
 * Source: Zhang (ed.), "The Schur Complement and Its Applications" (2005); Golub, Van Loan, "Matrix Computations", section 3.2.
 */
export function condense(
  keep: readonly number[],
  states: readonly number[],
  rows: readonly WhitenedRows[],
  dimensionOf: (state: number) => number,
): Condensed {
  const [keptFirst, kept] = firstUnknowns(keep, dimensionOf);
  const others = states.filter((state) => !keptFirst.has(state));
  const [otherFirst] = firstUnknowns(others, dimensionOf);
  const onKept = rows.map((r) => restrict(r, (state) => keptFirst.has(state)));
  const onOthers = rows.map((r) => restrict(r, (state) => otherFirst.has(state)));

  const information = new Float64Array(kept * kept);
  const unit = new Float64Array(kept * kept);
  for (let j = 0; j < kept; j += 1) unit[j * kept + j] = 1;
  const m = rows.reduce((sum, r) => sum + r.rows, 0);
  const residual = new Float64Array(m);
  let at = 0;
  for (const r of rows) {
    residual.set(r.residual, at);
    at += r.rows;
  }
  const vector = new Float64Array(kept);

  const place = new Map(others.map((state, k) => [state, k]));
  const inner = assembleInformation(Int32Array.from(others, dimensionOf), (state) => place.get(state)!, onOthers);
  const factor = factorize(SymmetricMatrix.adopt(inner), { blockSizes: inner.blockSizes });
  try {
    for (let from = 0; from < kept; from += COLUMNS) {
      const columns = Math.min(COLUMNS, kept - from);
      const effect = timesRows(
        onKept,
        (state) => keptFirst.get(state)!,
        unit.subarray(from * kept, (from + columns) * kept),
        kept,
        columns,
      );
      const seen = withoutOthers(effect, columns);
      addTransposed(information.subarray(from * kept, (from + columns) * kept), onKept, keptFirst, seen, kept, columns);
    }
    addTransposed(vector, onKept, keptFirst, withoutOthers(residual, 1), kept, 1);
  } finally {
    factor.dispose();
  }
  for (let i = 0; i < kept; i += 1)
    for (let j = 0; j < i; j += 1) {
      const mean = (information[i * kept + j]! + information[j * kept + i]!) / 2;
      information[i * kept + j] = mean;
      information[j * kept + i] = mean;
    }
  return { information, vector };

  /** E − J_i Λ_ii⁻¹ J_iᵀ E for columns E over the rows: what the other states cannot take up. */
  function withoutOthers(e: Float64Array, columns: number): Float64Array {
    const right = new Float64Array(inner.order * columns);
    addTransposed(right, onOthers, otherFirst, e, inner.order, columns);
    const taken = timesRows(onOthers, (state) => otherFirst.get(state)!, factor.solve(right, columns), inner.order, columns);
    return e.map((value, k) => value - taken[k]!);
  }
}

/** Where the unknowns of each state begin, one state after another, and how many there are. */
function firstUnknowns(states: readonly number[], dimensionOf: (state: number) => number): [Map<number, number>, number] {
  const first = new Map<number, number>();
  let order = 0;
  for (const state of states) {
    first.set(state, order);
    order += dimensionOf(state);
  }
  return [first, order];
}

/** The blocks of some states alone. */
function restrict(rows: WhitenedRows, isWanted: (state: number) => boolean): WhitenedRows {
  const kept = [...rows.states.keys()].filter((k) => isWanted(rows.states[k]!));
  return { ...rows, states: kept.map((k) => rows.states[k]!), blocks: kept.map((k) => rows.blocks[k]!) };
}

/** target += Jᵀ E: E is rows × columns, the target order × columns, both column-major. */
function addTransposed(
  target: Float64Array,
  rows: readonly WhitenedRows[],
  first: ReadonlyMap<number, number>,
  e: Float64Array,
  order: number,
  columns: number,
): void {
  const m = e.length / columns;
  for (let c = 0; c < columns; c += 1) {
    let at = c * m;
    for (const { states, blocks, rows: height } of rows) {
      for (let k = 0; k < states.length; k += 1) {
        const block = blocks[k]!;
        const to = c * order + first.get(states[k]!)!;
        for (let u = 0, p = 0; p < block.length; u += 1) {
          let sum = 0;
          for (let q = 0; q < height; q += 1, p += 1) sum += block[p]! * e[at + q]!;
          target[to + u]! += sum;
        }
      }
      at += height;
    }
  }
}
