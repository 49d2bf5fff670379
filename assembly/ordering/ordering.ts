/** The job that orders a graph: peel, then minimum degree on the core; hubs last. Or an order as it stands, or as given.
 *
 *  begin → advance(budget) until it is no longer RUNNING → finish, or release at any time. The graph must outlive the job. */
import { allocateArray, release } from "../memory/heap";
import { i32At, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";
import { Graph } from "./graph";
import { MinimumDegree, minimumDegreeAdvance, minimumDegreeBegin, minimumDegreeRelease } from "./minimum-degree";
import { Peel, peelAdvance, peelBegin, peelRelease } from "./peel";

// Kinds of order a caller can ask for.
const AUTOMATIC = 0;
const MINIMUM_DEGREE = 1;
const NATURAL = 3;
export const GIVEN = 4;

const PEELING = 0;
const ORDERING = 1;
const DONE = 2;

@unmanaged
export class Ordering {
  graph: Graph;
  phase: i32;
  /** i32[n], complete once the status is OK. */
  order: usize;
  peel: Peel;
  degree: MinimumDegree;
}

/** Starts to order `graph`. kind: 0 automatic, 1 minimum degree, 3 natural, 4 given (given i32[n] is copied).
 *  Address 0 when memory runs out. */
export function orderingBegin(graph: Graph, kind: i32, given: usize): usize {
  const n = graph.n;
  const job = changetype<Ordering>(allocateArray(<f64>offsetof<Ordering>(), 0));
  if (!changetype<usize>(job)) return 0;
  memory.fill(changetype<usize>(job), 0, offsetof<Ordering>());
  job.graph = graph;
  if (kind == AUTOMATIC || kind == MINIMUM_DEGREE) {
    const peel = peelBegin(graph);
    if (peel) { job.peel = peel; return changetype<usize>(job); }
  } else {
    job.phase = DONE;
    job.order = allocateArray(<f64>n + 1, 2);
    if (job.order) {
      if (kind == GIVEN) memory.copy(job.order, given, <usize>n << 2);
      else for (let k = 0; k < n; ++k) setI32(job.order, k, k);
      return changetype<usize>(job);
    }
  }
  orderingRelease(job);
  return 0;
}

/** Works for about `budget` units (about 1 ns each). RUNNING, OK or OUT_OF_MEMORY; after the last the job can only be released. */
export function orderingAdvance(job: Ordering, budget: f64): i32 {
  if (job.phase == PEELING) {
    const status = peelAdvance(job.peel, budget);
    if (status != OK) return status;
    const degree = minimumDegreeBegin(job.peel.core, 0);
    if (!degree) return OUT_OF_MEMORY;
    job.degree = degree;
    job.phase = ORDERING;
    return RUNNING;
  }
  if (job.phase == ORDERING) {
    const status = minimumDegreeAdvance(job.degree, budget);
    if (status != OK) return status;
    job.order = job.peel.order;
    job.peel.order = 0;
    for (let c = 0; c < job.degree.n; ++c) setI32(job.order, job.peel.peeled + c, i32At(job.peel.coreVertex, i32At(job.degree.order, c)));
    job.phase = DONE;
  }
  return OK;
}

/** Hands the order over, i32[n], for the caller to release, and ends the job. */
export function orderingFinish(job: Ordering): usize {
  assert(job.phase == DONE, "the ordering is not complete");
  const order = job.order;
  job.order = 0;
  orderingRelease(job);
  return order;
}

/** Ends the job at any stage and gives all its memory back. */
export function orderingRelease(job: Ordering): void {
  if (changetype<usize>(job.peel)) peelRelease(job.peel);
  if (changetype<usize>(job.degree)) minimumDegreeRelease(job.degree);
  release(job.order);
  release(changetype<usize>(job));
}
