/** The job that orders a graph: peel, then minimum degree on the core, by the classes of a dissection or without; hubs last. Or the
 *  order as it stands, or as given. `automatic` orders by minimum degree, predicts what the calls to be served will cost, dissects as
 *  well when that is much more than dissecting costs, and keeps the cheaper order.
 *
 *  begin → advance(budget) until it is no longer RUNNING → finish, or release at any time. The graph must outlive the job. */
import { allocateArray, release } from "../memory/heap";
import { f64At, i32At, setF64, setI32 } from "../memory/access";
import { OK, OUT_OF_MEMORY, RUNNING } from "../memory/status";
import { Dissection, dissectionAdvance, dissectionBegin, dissectionProgress, dissectionRelease, dissectionWork } from "./dissection";
import { Graph } from "./graph";
import { minimumDegreeAdvance, minimumDegreePaths, minimumDegreeWork } from "./minimum-degree";
import { Peel, peelAdvance, peelBegin, peelPaths, peelProgress, peelRelease, peelWork } from "./peel";
import { Prediction, predictedWork } from "./prediction";
import { MinimumDegree, minimumDegreeBegin, minimumDegreeRelease } from "./quotient-graph";

// Kinds of order a caller can ask for.
export const AUTOMATIC = 0;
export const MINIMUM_DEGREE = 1;
export const NESTED_DISSECTION = 2;
export const NATURAL = 3;
export const GIVEN = 4;

/** Dissect as well when this share of the predicted work passes what dissecting costs: about what it saves where it is the better
 *  order. Within 15 % of the best of both in 54 of 60 cases (nine families, three uses); never dissecting in 22. */
const EXPECTED_SAVING: f64 = 0.2;

const PEELING = 0;
const FIRST = 1; // minimum degree alone
const DISSECTING = 2;
const SECOND = 3; // minimum degree by classes
const WEIGHING = 4; // the order just found
const DONE = 5;
/** Vertices handled before the budget is looked at, and what weighing one costs in budget units. */
const CHUNK = 16384;
const WEIGH_COST: f64 = 30;

@unmanaged
export class Ordering {
  graph: Graph;
  phase: i32;
  kind: i32;
  /** MINIMUM_DEGREE or NESTED_DISSECTION for `automatic`, else the kind. Final once the status is OK. */
  chosen: i32;
  // What the order is made for.
  factorizations: f64;
  inverses: f64;
  queries: f64;
  /** i32[n], complete once the status is OK. */
  order: usize;
  /** Of that order, rows of hubs left out; zeros for natural and given orders. */
  prediction: Prediction;
  work: f64; // predicted for that order
  progress: f64; // the largest told so far
  peel: Peel;
  dissection: Dissection;
  degree: MinimumDegree;
  // Weighing goes through the pivots of the core, the core's vertices and the peeled ones.
  corePath: usize; // f64[core.n]
  pathOf: usize; // f64[n]
  cursor: i32;
  paths: f64;
}

/** Starts to order `graph`. kind: 0 automatic, 1 minimum degree, 2 nested dissection, 3 natural, 4 given (given i32[n] is copied).
 *  The rest says what the order is for: factorizations, selected inverses, marginals of single states. Address 0: no memory. */
export function orderingBegin(graph: Graph, kind: i32, given: usize, factorizations: f64, inverses: f64, queries: f64): usize {
  const n = graph.n;
  const job = changetype<Ordering>(allocateArray(<f64>offsetof<Ordering>(), 0));
  if (!changetype<usize>(job)) return 0;
  memory.fill(changetype<usize>(job), 0, offsetof<Ordering>());
  job.graph = graph;
  job.kind = kind;
  job.chosen = kind == AUTOMATIC ? MINIMUM_DEGREE : kind;
  job.factorizations = factorizations;
  job.inverses = inverses;
  job.queries = queries;
  const prediction = allocateArray(<f64>offsetof<Prediction>(), 0);
  job.prediction = changetype<Prediction>(prediction);
  if (prediction) memory.fill(prediction, 0, offsetof<Prediction>());
  if (kind == NATURAL || kind == GIVEN) {
    job.phase = DONE;
    job.order = allocateArray(<f64>n + 1, 2);
    if (job.order && prediction) {
      if (kind == GIVEN) memory.copy(job.order, given, <usize>n << 2);
      else for (let k = 0; k < n; ++k) setI32(job.order, k, k);
      return changetype<usize>(job);
    }
  } else {
    const peel = peelBegin(graph);
    if (peel) job.peel = peel;
    if (peel && prediction) return changetype<usize>(job);
  }
  orderingRelease(job);
  return 0;
}

/** Works for about `budget` units (about 1 ns each). RUNNING, OK or OUT_OF_MEMORY; after the last the job can only be released. */
export function orderingAdvance(job: Ordering, budget: f64): i32 {
  if (job.phase == DONE) return OK;
  if (job.phase == WEIGHING) return weigh(job, budget);
  const status = job.phase == PEELING ? peelAdvance(job.peel, budget)
    : job.phase == DISSECTING ? dissectionAdvance(job.dissection, budget)
    : minimumDegreeAdvance(job.degree, budget);
  if (status != OK) return status;
  const fits = job.phase == PEELING ? (job.kind == NESTED_DISSECTION ? beginDissection(job) : beginDegree(job, FIRST))
    : job.phase == DISSECTING ? beginDegree(job, SECOND)
    : beginWeighing(job);
  if (!fits) return OUT_OF_MEMORY;
  return job.phase == DONE ? OK : RUNNING;
}

/** Work done ÷ work predicted, 0 to 1. */
export function orderingProgress(job: Ordering): f64 {
  if (job.phase == DONE) return 1;
  const peeling = peelWork(job.graph);
  let done: f64 = 0, all: f64 = 0;
  if (job.phase == PEELING) {
    done = peeling * peelProgress(job.peel);
    all = peeling + minimumDegreeWork(job.graph) + (job.kind == MINIMUM_DEGREE ? 0 : dissectionWork(job.graph));
  } else {
    // Until minimum degree has told whether to dissect, suppose so: what is not to be done lets the share jump ahead, never back.
    const degree = minimumDegreeWork(job.peel.core), dissecting = job.kind == MINIMUM_DEGREE ? 0 : dissectionWork(job.peel.core);
    const rounds: f64 = job.kind == AUTOMATIC ? 2 : 1;
    all = peeling + dissecting + rounds * degree;
    done = peeling;
    const second = job.phase == SECOND || (job.phase == WEIGHING && changetype<usize>(job.dissection) != 0);
    if (job.phase == DISSECTING || second) done += (rounds - 1) * degree;
    if (job.phase == DISSECTING) done += dissecting * dissectionProgress(job.dissection);
    else {
      if (second) done += dissecting;
      done += degree * (1 - <f64>job.degree.verticesLeft / <f64>(job.degree.n + 1));
    }
  }
  job.progress = max(job.progress, min(1, done / (all + 1)));
  return job.progress;
}

/** The kind of the order: for `automatic`, which one was kept. */
export function orderingChosen(job: Ordering): i32 { return job.chosen; }

/** Predictions of the order: entries of L, Σ (column count)², mean entries on the way of an unknown to the root. */
export function orderingPrediction(job: Ordering): Prediction { return job.prediction; }

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
  if (changetype<usize>(job.dissection)) dissectionRelease(job.dissection);
  if (changetype<usize>(job.degree)) minimumDegreeRelease(job.degree);
  release(changetype<usize>(job.prediction));
  release(job.order);
  release(job.corePath);
  release(job.pathOf);
  release(changetype<usize>(job));
}

function beginDissection(job: Ordering): bool {
  const dissection = dissectionBegin(job.peel.core);
  if (!dissection) return false;
  job.dissection = dissection;
  job.phase = DISSECTING;
  return true;
}

function beginDegree(job: Ordering, phase: i32): bool {
  const degree = minimumDegreeBegin(job.peel.core, phase == SECOND ? job.dissection.classes : 0);
  if (!degree) return false;
  job.degree = degree;
  job.phase = phase;
  return true;
}

function beginWeighing(job: Ordering): bool {
  const n = job.graph.n;
  if (!job.order) job.order = allocateArray(<f64>n + 1, 2);
  if (!job.pathOf) job.pathOf = allocateArray(<f64>n + 1, 3);
  if (!job.corePath) job.corePath = allocateArray(<f64>job.peel.core.n + 1, 3);
  job.cursor = 0;
  job.paths = 0;
  job.phase = WEIGHING;
  return job.order && job.pathOf && job.corePath;
}

/** Sums the paths of the order just found; then takes it over if it is the first or the cheaper one, and decides what follows. */
function weigh(job: Ordering, budget: f64): i32 {
  const peel = job.peel, degree = job.degree, pivots = degree.pivotCount, cores = peel.core.n, all = pivots + cores + peel.peeled;
  for (let spent: f64 = 0; job.cursor < all; spent += CHUNK * WEIGH_COST) {
    if (spent >= budget) return RUNNING;
    const at = job.cursor;
    if (at < pivots) {
      job.cursor = min(at + CHUNK, pivots);
      job.paths += minimumDegreePaths(degree, job.corePath, pivots - job.cursor, pivots - at);
    } else if (at < pivots + cores) {
      job.cursor = min(at + CHUNK, pivots + cores);
      for (let c = at - pivots; c < job.cursor - pivots; ++c) setF64(job.pathOf, i32At(peel.coreVertex, c), f64At(job.corePath, c));
    } else {
      job.cursor = min(at + CHUNK, all);
      job.paths += peelPaths(peel, job.pathOf, all - job.cursor, all - at);
    }
  }
  return takeOver(job) ? (job.phase == DONE ? OK : RUNNING) : OUT_OF_MEMORY;
}

function takeOver(job: Ordering): bool {
  const n = job.graph.n, peel = job.peel, degree = job.degree, core = peel.core, kept = job.prediction;
  const unknowns = <f64>(degree.unknowns + peel.unknowns), second = changetype<usize>(job.dissection) != 0;
  const found = changetype<Prediction>(allocateArray(<f64>offsetof<Prediction>(), 0));
  if (!changetype<usize>(found)) return false;
  found.nonzeros = peel.nonzeros + degree.nonzeros;
  found.flops = peel.flops + degree.flops;
  found.path = unknowns > 0 ? job.paths / unknowns : 0;
  const work = predictedWork(found, job.factorizations, job.inverses, job.queries, unknowns / <f64>max(1, n - peel.hubs));
  const better = !second || job.kind == NESTED_DISSECTION || work < job.work;
  if (better) {
    job.prediction = found;
    job.work = work;
    if (second) job.chosen = NESTED_DISSECTION;
    memory.copy(job.order, peel.order, <usize>n << 2);
    for (let k = 0; k < core.n; ++k) setI32(job.order, peel.peeled + k, i32At(peel.coreVertex, i32At(degree.order, k)));
  }
  release(changetype<usize>(better ? kept : found));
  minimumDegreeRelease(degree);
  job.degree = changetype<MinimumDegree>(0);
  const cost = dissectionWork(core);
  if (job.kind == AUTOMATIC && !second && cost > 0 && EXPECTED_SAVING * job.work > cost) return beginDissection(job);
  job.phase = DONE;
  return true;
}
