// The network drawn in plan: states, readings between them, confidence ellipses, suspects. Display geometry alone.
import { type Assessment, errorEllipse } from "../decide/index.js";
import { escaped } from "./markup.js";
import type { LoadedNetwork } from "./network.js";

const width = 1000;
const margin = 46;
const mostHeight = 760;
const leastHeight = 240;
/** The largest ellipse is drawn with this semi-axis, a smaller one among so many that they would cover one another. */
const largestEllipse = 26;
const crowd = 150;
/** More lines than this hide one another. */
const mostLines = 6000;
const mostLabels = 24;
/** Labels closer than this would run into each other. */
const labelRoom = { across: 74, down: 15 };

interface Spot {
  readonly name: string;
  readonly fixed: boolean;
  readonly x: number;
  readonly y: number;
}

/** An SVG picture, or undefined when fewer than two states have a place in plan. `magnified`: how much larger ellipses are drawn. */
export function drawing(assessment: Assessment, { adjustment }: LoadedNetwork): { svg: string; magnified: number } | undefined {
  const spots = new Map<string, Spot>();
  for (const { name, kind, fixed, value } of adjustment.states())
    if (value && /^(point|planar-pose|spatial-pose)/.test(kind)) spots.set(name, { name, fixed, x: value[0]!, y: value[1]! });
  if (spots.size < 2) return undefined;
  const all = [...spots.values()];
  const range = (numbers: readonly number[]) =>
    numbers.reduce(([low, high], x) => [Math.min(low!, x), Math.max(high!, x)], [Infinity, -Infinity]);
  const [west, east] = range(all.map(({ x }) => x)) as [number, number];
  const [south, north] = range(all.map(({ y }) => y)) as [number, number];
  const scale = Math.min((width - 2 * margin) / (east - west || 1), (mostHeight - 2 * margin) / (north - south || 1));
  const height = Math.max(leastHeight, (north - south) * scale + 2 * margin);
  const across = (x: number) => width / 2 + (x - (west + east) / 2) * scale;
  const down = (y: number) => height / 2 - (y - (south + north) / 2) * scale;

  const covered = new Set<string>(); // of states in one place the worst, which comes first, is drawn
  const ellipses = assessment.states.flatMap(({ name, covariance, standardDeviations }) => {
    const spot = spots.get(name);
    const place = spot && `${Math.round(across(spot.x))} ${Math.round(down(spot.y))}`;
    if (!spot || !place || covered.has(place)) return [];
    covered.add(place);
    const n = standardDeviations.length;
    const plan = [covariance[0]!, covariance[1]!, covariance[n]!, covariance[n + 1]!];
    return [{ spot, ...errorEllipse(plan, { confidence: assessment.confidence }) }];
  });
  const largest = ellipses.reduce((most, { semiMajor }) => Math.max(most, semiMajor), 0);
  const pixels = largest > 0 ? largestEllipse / Math.sqrt(Math.max(1, ellipses.length / crowd)) / largest : 0;

  const sight = (from: Spot, to: Spot) =>
    `M${Math.round(across(from.x))} ${Math.round(down(from.y))}L${Math.round(across(to.x))} ${Math.round(down(to.y))}`;
  const ends = (states: readonly string[]) => states.flatMap((name) => spots.get(name) ?? []);
  const lines = new Set<string>();
  for (const { reading } of adjustment.readings()) {
    const [from, ...others] = ends(reading.states);
    for (const to of others) if (lines.size < mostLines) lines.add(sight(from!, to));
  }
  const doubted = assessment.screening.suspects.flatMap(({ reading }) => {
    const [from, ...others] = ends(reading.states);
    return others.length > 0 ? others.map((to) => sight(from!, to)) : [];
  });

  const round = (number: number) => number.toFixed(1);
  const shapes = ellipses.map(({ spot, semiMajor, semiMinor, bearing }) => {
    const turn = (bearing * 180) / Math.PI - 90;
    return `<ellipse rx="${round(semiMajor * pixels)}" ry="${round(Math.max(0.2, semiMinor * pixels))}" transform="translate(${round(across(spot.x))} ${round(down(spot.y))}) rotate(${round(turn)})"><title>${escaped(spot.name)}</title></ellipse>`;
  });
  const marks = all.map(({ name, fixed, x, y }) => {
    const [cx, cy] = [across(x), down(y)];
    const shape = fixed
      ? `<path d="M${round(cx - 5)} ${round(cy + 4)}h10l-5 -9z"/>`
      : `<circle cx="${round(cx)}" cy="${round(cy)}" r="1.6"/>`;
    return shape.replace("/>", `><title>${escaped(name)}</title></${fixed ? "path" : "circle"}>`);
  });
  const svg = [
    `<svg viewBox="0 0 ${width} ${Math.round(height)}" role="img" aria-label="The network in plan">`,
    `<path class="sights" d="${[...lines].join("")}"/>`,
    `<g class="ellipses">${shapes.join("")}</g>`,
    `<g class="marks">${marks.join("")}</g>`,
    doubted.length > 0 ? `<path class="doubted" d="${doubted.join("")}"/>` : "",
    `<g class="labels">${labels(assessment, spots, across, down).join("")}</g>`,
    `<g class="north"><path d="M${width - 24} 44v-30l-5 10m5 -10l5 10"/><text x="${width - 24}" y="58">N</text></g>`,
    scaleBar(scale, height),
    "</svg>",
  ];
  return { svg: svg.join("\n"), magnified: pixels / scale };
}

/** Names of fixed states, of those with suspect readings, and of the most sighted and the worst ones, where there is room. */
function labels(
  assessment: Assessment,
  spots: ReadonlyMap<string, Spot>,
  across: (x: number) => number,
  down: (y: number) => number,
): string[] {
  const wanted = [
    ...assessment.screening.suspects.flatMap(({ reading }) => reading.states),
    ...[...spots.values()].filter(({ fixed }) => fixed).map(({ name }) => name),
    ...assessment.states.map(({ name }) => name),
  ];
  const taken: [number, number][] = [];
  const texts: string[] = [];
  for (const name of new Set(wanted)) {
    const spot = spots.get(name);
    if (!spot || texts.length >= mostLabels) continue;
    const isRight = across(spot.x) > width - 110;
    const [x, y] = [across(spot.x) + (isRight ? -7 : 7), down(spot.y) - 6];
    if (taken.some(([u, v]) => Math.abs(u - x) < labelRoom.across && Math.abs(v - y) < labelRoom.down)) continue;
    taken.push([x, y]);
    texts.push(`<text x="${x.toFixed(1)}" y="${y.toFixed(1)}"${isRight ? ' text-anchor="end"' : ""}>${escaped(name)}</text>`);
  }
  return texts;
}

/** A bar of a round length: 1, 2 or 5 times a power of ten, an eighth of the width or less. */
function scaleBar(scale: number, height: number): string {
  const most = width / 8 / scale;
  const power = 10 ** Math.floor(Math.log10(most));
  const length = power * ([5, 2, 1].find((times) => times * power <= most) ?? 1);
  const y = Math.round(height) - 16;
  return `<g class="bar"><path d="M${margin} ${y - 4}v4h${(length * scale).toFixed(1)}v-4"/><text x="${margin}" y="${y - 9}">${length} m</text></g>`;
}
