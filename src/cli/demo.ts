// `sigmatide demo`: the monitoring of an invented quay wall, and what its engineer would read first.
import type { Command } from "commander";
import { assess, type Movement, movements } from "../decide/index.js";
import { epochComparisons, quayMonitoring } from "../demo/monitoring.js";
import { Estimate } from "../index.js";
import { applyEntry, type HeaderEntry } from "../log/index.js";
import { Adjustment } from "../model/index.js";
import { asText, type Block } from "./document.js";
import { findings, rowQuantitiesIn } from "./findings.js";
import { progressOn } from "./progress.js";
import { grouped, percent, UnitWriter } from "./units.js";

const level = 0.05;
const top = 10;

export function addDemoCommand(program: Command, loadKernel: () => Promise<void>): void {
  program
    .command("demo")
    .description("assess the monitoring log of an invented quay wall: what moved, which readings to doubt, how sure every mark is")
    .helpOption("--help", "print this help")
    .exitOverride()
    .action(async () => {
      await loadKernel();
      process.stdout.write(demo());
    });
}

/** The kernel must be loaded. */
function demo(): string {
  const progress = progressOn(process.stderr, "demo");
  const estimate = new Estimate({ track: "all" });
  try {
    const adjustment = new Adjustment(estimate, { onIteration: () => progress.say("solving") });
    let header: HeaderEntry | undefined;
    for (const entry of quayMonitoring().entries) {
      if (entry.type === "header") header = entry;
      applyEntry(adjustment, entry);
    }
    const network = { adjustment, estimate };
    const assessment = assess(network, {
      level,
      setAsideSuspects: true,
      onRound: (setAside) => progress.say(`testing readings, ${setAside} set aside`),
    });
    progress.say("comparing epochs");
    const compared = epochComparisons();
    const found = movements(
      network,
      compared.map(({ states }) => states),
      { level },
    );
    const units = new UnitWriter(header!.units, header!.deviationUnits);
    const [overview, ...rest] = findings(assessment, { units, top, rowQuantities: rowQuantitiesIn(adjustment) });
    const moved = movedBlock(
      compared.map((comparison, k) => ({ ...comparison, ...found[k]! })),
      units,
    );
    progress.end();
    return asText({
      title: `${header!.title} (an invented port: no real place, no real wall)`,
      blocks: [overview!, moved, ...rest],
    });
  } finally {
    progress.end();
    estimate.dispose();
  }
}

interface Comparison extends Movement {
  readonly mark: string;
  readonly bay: number;
  readonly epoch: number;
}

/** What has moved since the first epoch, the most moved first, as the last epoch sees it. */
function movedBlock(comparisons: readonly Comparison[], units: UnitWriter): Block {
  const last = comparisons.reduce((latest, { epoch }) => Math.max(latest, epoch), 0);
  const moved = comparisons.filter(({ verdict }) => verdict.verdict === "moved");
  const seenFrom = new Map<string, number>();
  for (const { mark, epoch } of moved) seenFrom.set(mark, Math.min(epoch, seenFrom.get(mark) ?? epoch));
  const final = comparisons.filter(({ mark, epoch }) => epoch === last && seenFrom.has(mark));
  final.sort((a, b) => b.verdict.length - a.verdict.length);
  const all = comparisons.filter(({ epoch }) => epoch === last);
  const detectable = all.reduce((worst, { verdict }) => Math.max(worst, verdict.smallestDetectable.worst), 0);
  const unit = units.deviationUnit("length");
  const millimetres = (number: number) => units.deviation("length", number);
  const blind = `A movement of ${millimetres(detectable)}${unit} in the worst direction of the worst mark would be found ${percent(all[0]!.verdict.power)} of the time.`;
  const sure = `${percent(level)} chance of any false alarm among ${grouped(comparisons.length)} comparisons`;
  if (final.length === 0) return { heading: "What moved", paragraphs: [`Nothing has (${sure}). ${blind}`] };
  const bays = [...new Set(final.map(({ bay }) => bay))].sort((a, b) => a - b);
  return {
    heading: "What moved",
    alarming: true,
    paragraphs: [
      `${final.length} of ${all.length} marks since epoch 1, in ${bays.length === 1 ? "bay" : "bays"} ${bays.join(", ")}, first seen in epoch ${Math.min(...seenFrom.values())}; the other ${all.length - final.length} show no movement (${sure}). Each number of millimetres with its standard deviation. ${blind}`,
    ],
    table: {
      headings: ["mark", "seen from epoch", ...["east", "north", "up"].map((axis) => `${axis}${unit}`), `in all${unit}`],
      rows: final.map(({ mark, displacement, standardDeviations, verdict }) => [
        mark,
        String(seenFrom.get(mark)),
        ...[...displacement].map((number, k) => `${millimetres(number)} ± ${millimetres(standardDeviations[k]!)}`),
        millimetres(verdict.length),
      ]),
      words: 1,
    },
  };
}
