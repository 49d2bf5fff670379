// A progress bar on standard error: only on a terminal, and only once the work has proved long.
const PATIENCE_MILLISECONDS = 500;
const WIDTH = 30;

/** Shows fractions of work; `end` clears the line. */
export interface Progress {
  show(fraction: number): void;
  end(): void;
}

export function progressOn(stream: NodeJS.WriteStream, what: string): Progress {
  const begun = Date.now();
  let shown = -1;
  return {
    show(fraction) {
      const percent = Math.floor(100 * fraction);
      if (!stream.isTTY || percent === shown || Date.now() - begun < PATIENCE_MILLISECONDS) return;
      shown = percent;
      const full = Math.round(WIDTH * fraction);
      const bar = `${"█".repeat(full)}${"░".repeat(WIDTH - full)}`;
      stream.write(`\r${what} ${process.env.NO_COLOR ? bar : `\x1b[36m${bar}\x1b[39m`} ${String(percent).padStart(3)} %`);
    },
    end() {
      if (shown >= 0) stream.write("\r\x1b[K");
    },
  };
}
