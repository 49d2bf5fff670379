// Progress on standard error: only on a terminal, and only once the work has proved long.
const PATIENCE_MILLISECONDS = 500;
const WIDTH = 30;

/** The part of a terminal that is written to. */
export interface Terminal {
  readonly isTTY?: boolean;
  write(text: string): unknown;
}

/** Shows how far the work has come; `end` clears the line. */
export interface Progress {
  /** A fraction of the work. */
  show(fraction: number): void;
  /** What is being done, where nobody can tell how much of it there is. */
  say(what: string): void;
  end(): void;
}

export function progressOn(stream: Terminal, what: string, patience: number = PATIENCE_MILLISECONDS): Progress {
  const begun = Date.now();
  let shown = "";
  const write = (text: string) => {
    if (!stream.isTTY || text === shown || Date.now() - begun < patience) return;
    shown = text;
    stream.write(`\r\x1b[K${text}`);
  };
  return {
    show(fraction) {
      const full = Math.round(WIDTH * fraction);
      const bar = `${"█".repeat(full)}${"░".repeat(WIDTH - full)}`;
      write(`${what} ${process.env.NO_COLOR ? bar : `\x1b[36m${bar}\x1b[39m`} ${String(Math.floor(100 * fraction)).padStart(3)} %`);
    },
    say: (doing) => write(`${what}: ${doing}`),
    end() {
      if (shown !== "") stream.write("\r\x1b[K");
      shown = "";
    },
  };
}
