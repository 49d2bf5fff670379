// The findings as a page: one file that loads nothing, with the network drawn, for a screen of any width and for paper.
import type { Assessment } from "../decide/index.js";
import type { Block, Document, TextTable } from "./document.js";
import { drawing } from "./drawing.js";
import { caution } from "./findings.js";
import { escaped } from "./markup.js";
import type { LoadedNetwork } from "./network.js";
import { percent } from "./units.js";

const style = `
:root { color-scheme: light dark; --ink: #1c2b33; --paper: #fbfaf7; --quiet: #62717a; --rule: #d5d9d6; --accent: #0b6e75; --alarm: #b3261e; --wash: #fdeeec; }
@media (prefers-color-scheme: dark) { :root { --ink: #e3e8e6; --paper: #15191b; --quiet: #9aa7a8; --rule: #343c3e; --accent: #58c0c4; --alarm: #ff8f84; --wash: #3a1f1d; } }
* { box-sizing: border-box; }
body { margin: 0 auto; max-width: 72rem; padding: 1.5rem clamp(0.75rem, 3vw, 2.5rem) 3rem; background: var(--paper); color: var(--ink); font: 16px/1.5 system-ui, sans-serif; }
h1 { font-size: clamp(1.35rem, 4vw, 2rem); line-height: 1.2; margin: 0 0 0.5rem; overflow-wrap: anywhere; }
h2 { font-size: 1.1rem; margin: 2rem 0 0.4rem; border-top: 1px solid var(--rule); padding-top: 0.9rem; }
p { margin: 0.4rem 0; max-width: 52rem; overflow-wrap: anywhere; }
.caution { border-left: 4px solid var(--accent); padding: 0.4rem 0.9rem; margin: 0.9rem 0; }
.alarming h2 { color: var(--alarm); }
.alarming > p:first-of-type { background: var(--wash); padding: 0.5rem 0.8rem; border-left: 4px solid var(--alarm); }
.scroll { overflow-x: auto; margin-top: 0.7rem; }
table { border-collapse: collapse; font-size: 0.85rem; font-variant-numeric: tabular-nums; }
th, td { padding: 0.22rem 0.7rem 0.22rem 0; text-align: right; white-space: nowrap; border-bottom: 1px solid var(--rule); }
th { color: var(--quiet); font-weight: 600; vertical-align: bottom; }
.word { text-align: left; }
td.fails { color: var(--alarm); font-weight: 600; }
figure { margin: 1.2rem 0; }
figcaption { color: var(--quiet); font-size: 0.85rem; }
svg { width: 100%; height: auto; display: block; border: 1px solid var(--rule); }
.sights { stroke: var(--quiet); stroke-width: 0.5; opacity: 0.28; fill: none; }
.ellipses { fill: var(--accent); fill-opacity: 0.1; stroke: var(--accent); stroke-width: 0.7; }
.marks { fill: var(--ink); }
.doubted { stroke: var(--alarm); stroke-width: 2; fill: none; }
.labels text, .north text, .bar text { font: 12px system-ui, sans-serif; fill: var(--ink); paint-order: stroke; stroke: var(--paper); stroke-width: 3px; stroke-linejoin: round; }
.north text { text-anchor: middle; }
.north path, .bar path { fill: none; stroke: var(--ink); stroke-width: 1.3; }
@media (max-width: 40rem) { .labels text, .north text, .bar text { font-size: 25px; } .labels text:nth-of-type(n + 7) { display: none; } }
@media print { body { max-width: none; } .scroll { overflow: visible; } table { font-size: 0.62rem; } h2 { break-after: avoid; } }
`;

export function asPage({ title, blocks }: Document, assessment: Assessment, network: LoadedNetwork): string {
  const [overview, ...rest] = blocks;
  return `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'">
<title>${escaped(title)}</title>
<style>${style}</style>
</head>
<body>
<h1>${escaped(title)}</h1>
${(overview?.paragraphs ?? []).map((text) => `<p>${escaped(text)}</p>`).join("\n")}
<p class="caution">${escaped(caution)}</p>
${figure(assessment, network)}
${rest
  .filter(({ paragraphs }) => paragraphs?.[0] !== caution)
  .map(section)
  .join("\n")}
</body>
</html>
`;
}

function figure(assessment: Assessment, network: LoadedNetwork): string {
  const drawn = drawing(assessment, network);
  if (!drawn) return "<p>The network has no plan positions to draw.</p>";
  const doubted = assessment.screening.suspects.length > 0 ? " Red: suspect readings." : "";
  const fixed = assessment.counts.fixed > 0 ? " Triangles: fixed." : "";
  return `<figure>${drawn.svg}
<figcaption>Plan, north up, with the ${percent(assessment.confidence)} ellipses drawn ${Number(drawn.magnified.toPrecision(2)).toLocaleString("en")} times their size.${fixed}${doubted}</figcaption></figure>`;
}

function section({ heading, paragraphs = [], table, alarming }: Block): string {
  return [
    `<section${alarming ? ' class="alarming"' : ""}>`,
    ...(heading === undefined ? [] : [`<h2>${escaped(heading)}</h2>`]),
    ...paragraphs.map((paragraph) => `<p>${escaped(paragraph)}</p>`),
    ...(table === undefined ? [] : [tableMarkup(table)]),
    "</section>",
  ].join("\n");
}

function tableMarkup({ headings, rows, words }: TextTable): string {
  const isWord = (c: number) => (c < words ? ' class="word"' : "");
  const head = headings.map((heading, c) => `<th scope="col"${isWord(c)}>${escaped(heading)}</th>`).join("");
  const body = rows.map((row) => {
    const cells = row.map((text, c) => `<td${text === "fails" ? ' class="fails"' : isWord(c)}>${escaped(text)}</td>`);
    return `<tr>${cells.join("")}</tr>`;
  });
  return `<div class="scroll" tabindex="0"><table><thead><tr>${head}</tr></thead><tbody>\n${body.join("\n")}\n</tbody></table></div>`;
}
