/** What the demo says while it runs: a line that rewrites itself on a terminal, plain lines elsewhere. */

/** Narrator of one run. */
export class Narrator {
  private readonly isTerminal: boolean;
  private readonly isQuiet: boolean;
  private readonly startedAt = performance.now();
  private lastPlain = 0;
  private hasLive = false;

  constructor(options: { readonly quiet: boolean }) {
    this.isQuiet = options.quiet;
    this.isTerminal = process.stderr.isTTY === true;
  }

  /** Seconds since the run began. */
  get seconds(): number {
    return (performance.now() - this.startedAt) / 1000;
  }

  /** A line that stays. */
  say(text: string): void {
    if (this.isQuiet) return;
    this.clear();
    process.stderr.write(`${stamp(this.seconds)}  ${text}\n`);
  }

  /** A line that is replaced by the next one; off a terminal one every five seconds is kept. */
  live(text: string): void {
    if (this.isQuiet) return;
    if (this.isTerminal) {
      this.hasLive = true;
      const width = (process.stderr.columns ?? 100) - 1;
      process.stderr.write(`\r\u001b[2K${`${stamp(this.seconds)}  ${text}`.slice(0, width)}`);
    } else if (this.seconds - this.lastPlain >= 5) {
      this.lastPlain = this.seconds;
      process.stderr.write(`${stamp(this.seconds)}  ${text}\n`);
    }
  }

  /** Ends the live line. */
  clear(): void {
    if (this.hasLive) process.stderr.write('\r\u001b[2K');
    this.hasLive = false;
  }
}

const stamp = (seconds: number): string => `${seconds.toFixed(1).padStart(6)} s`;

/** Plain columns for a terminal, as wide as their widest cell; numbers to the right. */
export function formatColumns(header: readonly string[], rows: readonly (readonly string[])[]): string {
  const widths = header.map((title, c) => Math.max(title.length, ...rows.map((row) => row[c].length)));
  const isNumber = header.map(
    (_, c) => rows.length > 0 && rows.every((row) => /^[-+]?[\d.,]+( ?\S{0,5})?$/.test(row[c])),
  );
  const line = (row: readonly string[]): string =>
    row
      .map((cell, c) => (isNumber[c] ? cell.padStart(widths[c]) : cell.padEnd(widths[c])))
      .join('  ')
      .trimEnd();
  return [line(header), widths.map((width) => '-'.repeat(width)).join('  '), ...rows.map(line)].join('\n');
}
