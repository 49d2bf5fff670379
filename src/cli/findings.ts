// An assessment in words and tables, in the order in which somebody responsible would ask.
import type { Assessment, GivenReading, RelativePrecision, SemiAxis, StatePrecision, Suspect, Weakness } from "../decide/index.js";
import type { Adjustment } from "../model/index.js";
import { findForm, type Quantity, type ReadingKind, type ReadingKindName, readingKinds, stateKinds } from "../model/index.js";
import type { Block, TextTable } from "./document.js";
import { lineOf } from "./network.js";
import { grouped, percent, type UnitWriter } from "./units.js";

export const caution: string =
  "These are computed estimates: as good as the readings, the standard deviations and the model that went in. Where people or structures " +
  "can come to harm, and wherever a vehicle relies on them, decisions follow local codes and a licensed professional, not this program.";

export interface FindingsOptions {
  readonly units: UnitWriter;
  /** Rows of the table of states. */
  readonly top: number;
  /** What each row of a reading measures. */
  readonly rowQuantities: (reading: GivenReading) => readonly Quantity[];
}

/** What each row of a reading measures, by its kind and its states. */
export function rowQuantitiesIn(adjustment: Adjustment): FindingsOptions["rowQuantities"] {
  return ({ kind, states }) => {
    const readingKind: ReadingKind = typeof kind === "string" ? readingKinds[kind as ReadingKindName] : kind;
    const form = findForm(
      readingKind,
      states.map((state) => adjustment.state(state).kind),
    );
    return form!.rowQuantities;
  };
}

export function findings(assessment: Assessment, options: FindingsOptions): Block[] {
  return [
    { paragraphs: [overview(assessment)] },
    limitBlock(assessment, options),
    fitBlock(assessment),
    suspectsBlock(assessment, options),
    ...stateBlocks(assessment.states, assessment.confidence, options),
    weakestBlock(assessment.weakest, options),
    betweenBlock(assessment.between, assessment.confidence, options),
    controlBlock(assessment),
    { heading: "Caution", paragraphs: [caution] },
  ].flatMap((block) => (block === undefined ? [] : [block]));
}

const small = (probability: number): string => (probability < 1e-12 ? "less than 1e-12" : probability.toPrecision(2));
const plural = (count: number, one: string): string => `${grouped(count)} ${one}${count === 1 ? "" : "s"}`;

function overview({ counts, globalTest, suspectsSetAside, screening }: Assessment): string {
  const fixed = counts.fixed > 0 ? ` and ${grouped(counts.fixed)} held fixed` : "";
  const redundancy = globalTest ? globalTest.degreesOfFreedom[0]! : 0;
  const aside = suspectsSetAside ? ` Values below are without ${screening.suspects.length === 1 ? "the suspect" : "the suspects"}.` : "";
  return `${plural(counts.readings, "reading")}, ${plural(counts.states, "state")} estimated${fixed}, ${plural(counts.unknowns, "unknown")}, redundancy ${grouped(redundancy)}.${aside}`;
}

function limitBlock({ states, between, failing, confidence }: Assessment, { units }: FindingsOptions): Block | undefined {
  const held = [...states, ...between].filter(({ tolerance }) => tolerance !== undefined);
  if (held.length === 0) return undefined;
  const limits = [
    ...new Set(held.map(({ quantity, tolerance }) => `${units.deviation(quantity, tolerance!.threshold)}${units.deviationUnit(quantity)}`)),
  ];
  const nameOf = (one: StatePrecision | RelativePrecision) => ("name" in one ? one.name : `${one.first} – ${one.second}`);
  const names = held.filter(({ tolerance }) => tolerance!.verdict === "fails the limit").map(nameOf);
  const shown = `${names.slice(0, 8).join(", ")}${names.length > 8 ? `, and ${names.length - 8} more` : ""}`;
  return {
    heading: "Limit",
    alarming: failing > 0,
    paragraphs: [
      failing > 0
        ? `${grouped(failing)} of ${grouped(held.length)} fail the limit of ${limits.join(", ")} at ${percent(confidence)} confidence, worst first: ${shown}.`
        : `All ${grouped(held.length)} meet the limit of ${limits.join(", ")} at ${percent(confidence)} confidence.`,
    ],
  };
}

function fitBlock({ globalTest, globalTestWithoutSuspects, screening }: Assessment): Block {
  if (!globalTest)
    return { heading: "Fit", paragraphs: ["No reading is redundant: nothing can be tested, and a blunder would go unseen. Add readings."] };
  const without =
    screening.suspects.length > 0 && globalTestWithoutSuspects
      ? [`Without the ${plural(screening.suspects.length, "suspect")}: ${globalTestWithoutSuspects.because}`]
      : [];
  return {
    heading: "Fit",
    alarming: (globalTestWithoutSuspects ?? globalTest).verdict === "more than stated",
    paragraphs: [globalTest.because, ...without],
  };
}

const nameOf = (reading: GivenReading): string =>
  reading.name ?? `${typeof reading.kind === "string" ? reading.kind : "reading"} ${reading.states.join(" – ")}`;

/** "line 12, e1/S1/A/direction" */
function placeOf(reading: GivenReading): string {
  const line = lineOf(reading);
  return `${line === undefined ? "" : `line ${line}, `}${nameOf(reading)}`;
}

function suspectsBlock({ screening }: Assessment, options: FindingsOptions): Block {
  const { suspects, overwhelmed, level, tests, control } = screening;
  const heading = "Suspect readings";
  if (overwhelmed !== undefined)
    return {
      heading,
      alarming: true,
      paragraphs: [
        `${grouped(overwhelmed)} of ${grouped(tests)} readings stand out: too many for blunders. Look for standard deviations stated too small, a wrong approximate value, or an effect that the model leaves out. None is named.`,
      ],
    };
  const untested = Object.values(control.grades).reduce((sum, count) => sum + count, 0) - tests;
  const rest =
    untested > 0 ? ` ${plural(untested, "reading")} could not be tested: nothing else controls ${untested === 1 ? "it" : "them"}.` : "";
  if (suspects.length === 0)
    return {
      heading,
      paragraphs: [
        `None of ${grouped(tests)} tested readings is doubted (${percent(level)} chance of any false alarm among all of them).${rest}`,
      ],
    };
  return {
    heading,
    alarming: true,
    paragraphs: [
      `${grouped(suspects.length)} of ${grouped(tests)} tested readings, the most conspicuous first (${percent(level)} chance of any false alarm among all of them); each against what the readings that are not suspect say. Detectable: the smallest error that its test finds ${percent(suspects[0]!.reliability.power)} of the time. Check each in the field before you drop it.${rest}`,
    ],
    table: suspectsTable(suspects, options),
  };
}

function suspectsTable(suspects: readonly Suspect[], { units, rowQuantities }: FindingsOptions): TextTable {
  const rows = suspects.map(({ reading, discrepancy, standardDeviations, verdict, reliability, confusable }) => {
    const quantities = rowQuantities(reading);
    const inUnits = (numbers: Float64Array) => quantities.map((quantity, k) => units.deviation(quantity, numbers[k]!)).join(" / ");
    const unit = [...new Set(quantities.map((quantity) => units.deviationUnit(quantity).trim()))].join(" / ");
    const statistic = verdict.distribution === "normal" ? Math.abs(verdict.statistic) : Math.sqrt(verdict.statistic);
    const threshold = verdict.distribution === "normal" ? verdict.threshold : Math.sqrt(verdict.threshold);
    return [
      String(lineOf(reading) ?? ""),
      nameOf(reading),
      confusable.length > 0 ? confusable.map((other) => placeOf(other.reading)).join("; ") : "–",
      unit,
      inUnits(discrepancy),
      inUnits(standardDeviations),
      inUnits(reliability.minimalDetectableBias),
      statistic.toFixed(1),
      threshold.toFixed(1),
      small(verdict.probability),
    ];
  });
  return {
    headings: ["line", "reading", "could also be", "unit", "off by", "± σ", "detectable", "times σ", "limit", "chance"],
    rows,
    words: 4,
  };
}

const axes: Readonly<Record<string, readonly string[]>> = {
  "point-2d": ["x", "y"],
  "planar-pose": ["x", "y", "heading"],
  "point-3d": ["x", "y", "z"],
  "spatial-pose": ["x", "y", "z"],
};

const groupHeadings: Readonly<Record<Quantity, string>> = {
  length: "Positions and heights",
  angle: "Orientations",
  time: "Clock offsets",
  plain: "Numbers",
};

/** One table for each quantity, worst first. */
function stateBlocks(states: readonly StatePrecision[], confidence: number, options: FindingsOptions): Block[] {
  return (Object.keys(groupHeadings) as Quantity[]).flatMap((quantity) => {
    const all = states.filter((state) => state.quantity === quantity);
    if (all.length === 0) return [];
    const shown = all.slice(0, options.top);
    const count = shown.length < all.length ? `${grouped(shown.length)} of ${grouped(all.length)}. ` : "";
    return [
      {
        heading: `${groupHeadings[quantity]}, worst first`,
        paragraphs: [`${count}Standard deviations σ, and semi-axes a ≥ b ≥ c of the ${percent(confidence)} region.`],
        table: quantity === "length" ? positionsTable(shown, options) : numbersTable(shown, quantity, options),
      },
    ];
  });
}

function positionsTable(states: readonly StatePrecision[], { units }: FindingsOptions): TextTable {
  const [unit, deviationUnit] = [units.unit("length"), units.deviationUnit("length")];
  const hasHeading = states.some(({ kind }) => kind === "planar-pose");
  const isWide = states.some(({ tolerance }) => tolerance !== undefined);
  const rows = states.map(({ name, kind, value, standardDeviations: s, semiAxes, tolerance }) => {
    const names = kind === "height" ? ["z"] : axes[kind]!;
    const at = (axis: string, write: (k: number) => string) => (names.includes(axis) ? write(names.indexOf(axis)) : "");
    const semi = (k: number) => (semiAxes[k] ? units.deviation("length", semiAxes[k].length) : "");
    return [
      name,
      ...["x", "y", "z"].map((axis) => at(axis, (k) => units.value("length", value[k]!, s[k]!))),
      ...["x", "y", "z"].map((axis) => at(axis, (k) => units.deviation("length", s[k]!))),
      ...[0, 1, 2].map(semi),
      bearingOf(semiAxes[0]!, units),
      elevationOf(semiAxes[0]!, units),
      ...(hasHeading
        ? [at("heading", (k) => units.value("angle", value[k]!, s[k]!)), at("heading", (k) => units.deviation("angle", s[k]!))]
        : []),
      ...(isWide ? [tolerance?.verdict === "fails the limit" ? "fails" : "meets"] : []),
    ];
  });
  const inValue = (name: string) => `${name}${unit}`;
  const inDeviation = (name: string) => `${name}${deviationUnit}`;
  const headings = [
    "state",
    ...["x", "y", "z"].map(inValue),
    ...["σx", "σy", "σz"].map(inDeviation),
    ...["a", "b", "c"].map(inDeviation),
    `bearing of a${units.unit("angle")}`,
    `up${units.unit("angle")}`,
    ...(hasHeading ? [`heading${units.unit("angle")}`, `σ heading${units.deviationUnit("angle")}`] : []),
    ...(isWide ? ["limit"] : []),
  ];
  const used = headings.map((_, c) => c === 0 || rows.some((row) => row[c] !== ""));
  return { headings: headings.filter((_, c) => used[c]), rows: rows.map((row) => row.filter((_, c) => used[c])), words: 1 };
}

const bearingOf = ({ bearing }: SemiAxis, units: UnitWriter): string => (bearing === undefined ? "" : units.bearing(bearing));
const elevationOf = ({ elevation }: SemiAxis, units: UnitWriter): string => (elevation === undefined ? "" : units.bearing(elevation));

function numbersTable(states: readonly StatePrecision[], quantity: Quantity, { units }: FindingsOptions): TextTable {
  const isHeld = states.some(({ tolerance }) => tolerance !== undefined);
  return {
    headings: [
      "state",
      `value${units.unit(quantity)}`,
      `σ${units.deviationUnit(quantity)}`,
      `a${units.deviationUnit(quantity)}`,
      ...(isHeld ? ["limit"] : []),
    ],
    rows: states.map(({ name, value, standardDeviations, semiAxes, tolerance }) => [
      name,
      units.value(quantity, value[0]!, standardDeviations[0]!),
      units.deviation(quantity, standardDeviations[0]!),
      units.deviation(quantity, semiAxes[0]!.length),
      ...(isHeld ? [tolerance?.verdict === "fails the limit" ? "fails" : "meets"] : []),
    ]),
    words: 1,
  };
}

/** Readings that bring less than this of a state's variance are not worth a word. */
const leastShare = 0.01;

function weakestBlock(weakest: readonly Weakness[], { units }: FindingsOptions): Block | undefined {
  if (weakest.length === 0) return undefined;
  const quantityOf = ({ kind }: { kind: Weakness["kind"] }) => stateKinds[kind].localQuantities[0]!;
  const paragraphs = weakest.map((one) => {
    const quantity = quantityOf(one);
    const known = (deviation: number) => `${units.deviation(quantity, deviation)}${units.deviationUnit(quantity)}`;
    const alone =
      one.deviationAlone === undefined
        ? "Its own readings alone do not determine it."
        : `If its neighbours were exact it would be ${known(one.deviationAlone)}.`;
    const carried = one.determinedBy
      .filter(({ share }) => share >= leastShare)
      .map(({ reading, share }) => `${placeOf(reading)} ${percent(Number(share.toFixed(3)))}`);
    return `${one.name}: σ ${known(one.deviation)} in its worst direction, from ${plural(one.readings, "reading")}. ${alone}${carried.length > 0 ? ` Its variance comes from ${carried.join("; ")}.` : ""}`;
  });
  return { heading: "The weakest, and what determines them", paragraphs };
}

function betweenBlock(between: readonly RelativePrecision[], confidence: number, { units }: FindingsOptions): Block | undefined {
  if (between.length === 0) return undefined;
  const isHeld = between.some(({ tolerance }) => tolerance !== undefined);
  return {
    heading: "Between states",
    paragraphs: [`Second minus first, with standard deviations, and semi-axes of the ${percent(confidence)} region of the difference.`],
    table: {
      headings: ["from", "to", "unit", "difference", "length", "unit of σ", "σ", "σ of length", "semi-axes", ...(isHeld ? ["limit"] : [])],
      rows: between.map(({ first, second, quantity, difference, standardDeviations, length, lengthDeviation, semiAxes, tolerance }) => [
        first,
        second,
        units.unit(quantity).trim(),
        [...difference].map((number, k) => units.value(quantity, number, standardDeviations[k]!)).join(" / "),
        units.value(quantity, length, lengthDeviation),
        units.deviationUnit(quantity).trim(),
        [...standardDeviations].map((number) => units.deviation(quantity, number)).join(" / "),
        units.deviation(quantity, lengthDeviation),
        semiAxes.map((axis) => units.deviation(quantity, axis.length)).join(" / "),
        ...(isHeld ? [tolerance?.verdict === "fails the limit" ? "fails" : "meets"] : []),
      ]),
      words: 3,
    },
  };
}

function controlBlock({ screening: { control } }: Assessment): Block {
  const grades = Object.entries(control.grades).map(([grade, count]) => `${grouped(count)} ${grade}`);
  const worst = control.least
    .slice(0, 5)
    .map(({ reading, redundancy }) => `${placeOf(reading)} (${percent(Number(redundancy.toFixed(4)))})`);
  return {
    heading: "Redundancy",
    paragraphs: [
      `How well the readings control one another: ${grades.join(", ")}.`,
      `Least controlled, with the share of a blunder that would show in the residual: ${worst.join("; ")}.`,
    ],
  };
}
