// Where a point in plan may lie after one reading, and the points that two of them share: intersection of rays and of arcs, and resection
// by Cassini's circles (1669: the points that see two marks under one angle lie on a circle through the marks).

export type PlanPoint = readonly [x: number, y: number];

/** A line or a circle on which the point lies, and how far from agreeing with the reading any point is, in metres. */
export interface Locus {
  readonly curve:
    | { readonly type: "circle"; readonly centre: PlanPoint; readonly radius: number }
    | { readonly type: "line"; readonly through: PlanPoint; readonly along: PlanPoint };
  misfit(point: PlanPoint): number;
  /** Known points it hangs on, and a length that it sets beside them: together they give the figure its size. */
  readonly marks: readonly PlanPoint[];
  readonly length: number;
}

/** Points at `radius` from a known point. */
export function circle(centre: PlanPoint, radius: number): Locus {
  return {
    curve: { type: "circle", centre, radius },
    marks: [centre],
    length: radius,
    misfit: ([x, y]) => Math.hypot(x - centre[0], y - centre[1]) - radius,
  };
}

/** Points seen from a known point at an azimuth: a half line, clockwise from north. */
export function ray(from: PlanPoint, azimuth: number): Locus {
  const along: PlanPoint = [Math.sin(azimuth), Math.cos(azimuth)];
  return {
    curve: { type: "line", through: from, along },
    marks: [from],
    length: 0,
    misfit([x, y]) {
      const [dx, dy] = [x - from[0], y - from[1]];
      const ahead = dx * along[0] + dy * along[1];
      return ahead > 0 ? dx * along[1] - dy * along[0] : Math.hypot(dx, dy);
    },
  };
}

/** At this sine, line and circle are each a centimetre or two off at some hundred metres: less than a starting value needs. */
const narrowestArc = 1e-6;

/** Points that see `second` at `angle` clockwise of `first`: an arc of a circle through both. */
export function inscribedArc(first: PlanPoint, second: PlanPoint, angle: number): Locus {
  const [dx, dy] = [second[0] - first[0], second[1] - first[1]];
  const half = Math.hypot(dx, dy) / 2;
  const sine = Math.sin(angle);
  const misfit = ([x, y]: PlanPoint): number => {
    const toFirst = Math.atan2(first[0] - x, first[1] - y);
    const toSecond = Math.atan2(second[0] - x, second[1] - y);
    const off = toSecond - toFirst - angle;
    const reach = Math.min(Math.hypot(first[0] - x, first[1] - y), Math.hypot(second[0] - x, second[1] - y));
    return (off - 2 * Math.PI * Math.round(off / (2 * Math.PI))) * reach;
  };
  const figure = { misfit, marks: [first, second], length: 2 * half };
  // Near 0 and π the circle widens to the line through both marks; a wider one would lose its intersections to rounding.
  if (Math.abs(sine) < narrowestArc)
    return { curve: { type: "line", through: first, along: [dx / (2 * half), dy / (2 * half)] }, ...figure };
  // The centre sees the chord under twice the angle: it lies half·cot(angle) from the chord's middle, on the points' side for an acute angle.
  const offset = Math.cos(angle) / sine / 2;
  const centre: PlanPoint = [(first[0] + second[0]) / 2 + offset * dy, (first[1] + second[1]) / 2 - offset * dx];
  return { curve: { type: "circle", centre, radius: half / Math.abs(sine) }, ...figure };
}

/** The points that two loci share, at most two; where noise keeps them just apart, the point nearest to both. */
function intersections(a: Locus["curve"], b: Locus["curve"]): PlanPoint[] {
  if (a.type === "line" && b.type === "line") {
    const cross = a.along[0] * b.along[1] - a.along[1] * b.along[0];
    if (Math.abs(cross) < 1e-6) return []; // almost parallel: they meet nowhere worth starting from
    const [dx, dy] = [b.through[0] - a.through[0], b.through[1] - a.through[1]];
    const t = (dx * b.along[1] - dy * b.along[0]) / cross;
    return [[a.through[0] + t * a.along[0], a.through[1] + t * a.along[1]]];
  }
  if (a.type === "line") return intersections(b, a);
  if (b.type === "line") {
    const [dx, dy] = [a.centre[0] - b.through[0], a.centre[1] - b.through[1]];
    const foot = dx * b.along[0] + dy * b.along[1];
    const away = dx * b.along[1] - dy * b.along[0];
    return both(Math.sqrt(Math.max(0, a.radius ** 2 - away ** 2)), (h) => [
      b.through[0] + (foot + h) * b.along[0],
      b.through[1] + (foot + h) * b.along[1],
    ]);
  }
  const [dx, dy] = [b.centre[0] - a.centre[0], b.centre[1] - a.centre[1]];
  const distance = Math.hypot(dx, dy);
  if (distance < 1e-9 * (a.radius + b.radius)) return []; // one centre: the circles meet everywhere or nowhere
  const foot = (distance + (a.radius ** 2 - b.radius ** 2) / distance) / 2;
  const [ux, uy] = [dx / distance, dy / distance];
  return both(Math.sqrt(Math.max(0, a.radius ** 2 - foot ** 2)), (h) => [
    a.centre[0] + foot * ux - h * uy,
    a.centre[1] + foot * uy + h * ux,
  ]);
}

const both = (h: number, at: (h: number) => PlanPoint): PlanPoint[] => (h === 0 ? [at(0)] : [at(h), at(-h)]);

/** More loci than this add nothing to a starting value. */
const enoughLoci = 8;
/** A second place is as good when its misfit, root mean square, is within this many times the best one's. */
const equalFit = 4;
/** Places nearer than this share of the figure's size are one… */
const samePlace = 1e-3;
/** …and so are places nearer than this many times the best one's misfit: rough known points blur where loci meet. */
const blur = 20;

/** The point where the loci meet; `"ambiguous"` when another one fits as well, `undefined` when they do not meet. */
export function meetingPoint(loci: readonly Locus[]): PlanPoint | "ambiguous" | undefined {
  const used = loci.slice(0, enoughLoci);
  const candidates: { point: PlanPoint; score: number }[] = [];
  for (const [i, a] of used.entries())
    for (const b of used.slice(0, i))
      for (const point of intersections(a.curve, b.curve)) {
        const score = Math.sqrt(used.reduce((sum, locus) => sum + locus.misfit(point) ** 2, 0) / used.length);
        if (Number.isFinite(score)) candidates.push({ point, score });
      }
  const size = figureSize(used);
  const apart = (a: PlanPoint, b: PlanPoint) => separation(a, b) > samePlace * size;
  // Arcs through one mark meet there too, and no point is sought on a mark.
  const offMarks = candidates.filter(({ point }) => used.every(({ marks }) => marks.every((mark) => apart(point, mark))));
  const sorted = offMarks.sort((a, b) => a.score - b.score);
  const best = sorted[0];
  if (best === undefined) return undefined;
  // Both scores of an undecided pair are rounding: the floor keeps their ratio from deciding.
  const floor = 1e-6 * size;
  const misfit = Math.max(best.score, floor);
  const rival = sorted.find(
    ({ point, score }) => score < equalFit * misfit && apart(point, best.point) && separation(point, best.point) > blur * misfit,
  );
  if (rival !== undefined) return "ambiguous";
  return best.point;
}

const separation = (a: PlanPoint, b: PlanPoint): number => Math.hypot(a[0] - b[0], a[1] - b[1]);

function figureSize(loci: readonly Locus[]): number {
  const marks = loci.flatMap((locus) => locus.marks);
  const fromFirst = marks.map((mark) => separation(mark, marks[0]!));
  return Math.max(0, ...loci.map(({ length }) => length), ...fromFirst);
}
