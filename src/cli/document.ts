// What the command has to say, as blocks: written as text on a terminal, or as a page (`page.ts`).

export interface TextTable {
  readonly headings: readonly string[];
  readonly rows: readonly (readonly string[])[];
  /** The first so many columns are words and stand left; the others are numbers. */
  readonly words: number;
}

export interface Block {
  readonly heading?: string;
  readonly paragraphs?: readonly string[];
  readonly table?: TextTable;
  /** Asks for attention. */
  readonly alarming?: boolean;
}

export interface Document {
  readonly title: string;
  readonly blocks: readonly Block[];
}

const width = 110;

/** The document as plain text. */
export function asText({ title, blocks }: Document): string {
  const parts = blocks.map(({ heading, paragraphs = [], table }) =>
    [
      ...(heading === undefined ? [] : [heading.toUpperCase()]),
      ...paragraphs.map((paragraph) => wrapped(paragraph, width)),
      ...(table === undefined ? [] : [tableAsText(table)]),
    ].join("\n"),
  );
  return `${[title, ...parts].join("\n\n")}\n`;
}

function tableAsText({ headings, rows, words }: TextTable): string {
  const widths = headings.map((heading, c) => rows.reduce((most, row) => Math.max(most, row[c]!.length), heading.length));
  const line = (cells: readonly string[]) =>
    cells
      .map((cell, c) => (c < words ? cell.padEnd(widths[c]!) : cell.padStart(widths[c]!)))
      .join("  ")
      .trimEnd();
  return [headings, ...rows].map(line).join("\n");
}

/** Broken at blanks into lines of at most `most` characters. */
function wrapped(paragraph: string, most: number): string {
  const lines = [""];
  for (const word of paragraph.split(" ")) {
    const last = lines.length - 1;
    if (lines[last] === "") lines[last] = word;
    else if (lines[last]!.length + 1 + word.length <= most) lines[last] += ` ${word}`;
    else lines.push(word);
  }
  return lines.join("\n");
}
