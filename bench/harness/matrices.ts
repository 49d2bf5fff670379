// The families' matrices, made once a run.
import { SymmetricMatrix } from "../../src/index.js";
import { type Information, information } from "../families/information.js";
import { type FamilyName, families } from "../families.js";
import type { RunOptions } from "./report.js";

export interface Case {
  readonly family: FamilyName;
  readonly states: number;
  readonly information: Information;
  readonly matrix: SymmetricMatrix;
}

/** Sizes above this are left out of a quick run. */
const quickStates = 10_000;

/** The sizes of each family asked for, one matrix at a time: a caller that keeps none lets it go. */
export function* cases(names: readonly FamilyName[], { families: asked, quick }: RunOptions): Generator<Case> {
  for (const family of names) {
    if (asked.length > 0 && !asked.includes(family)) continue;
    for (const states of families[family].sizes) {
      if (quick && states > quickStates) continue;
      const made = information(families[family].make(states));
      const { order, columnPointers, rowIndices, values } = made;
      yield { family, states, information: made, matrix: SymmetricMatrix.fromColumns({ order, columnPointers, rowIndices, values }) };
    }
  }
}

/** The families of single matrices; heavy patrols are for streams. */
export const singleMatrices: readonly FamilyName[] = ["net", "patrol", "landmarks", "helix", "chain", "grid"];
