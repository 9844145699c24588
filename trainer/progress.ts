/**
 * Progress of a long step, on standard error and only when a person watches: into a file or a pipe it writes nothing, so
 * that logs and `--json` stay clean.
 */

/** Told how far a step is; `total` null where the end is not known. */
export interface Progress {
  update(done: number, total: number | null): void;
  /** Takes the line away again. */
  end(): void;
}

const REDRAW_MS = 120;

/** Seconds as people read them. */
export function clockText(seconds: number): string {
  if (seconds < 60) return `${Math.ceil(seconds)} s`;
  return `${Math.floor(seconds / 60)} min ${Math.ceil(seconds % 60)} s`;
}

function count(value: number): string {
  if (value >= 1e6) return `${(value / 1e6).toFixed(1)} M`;
  if (value >= 1e4) return `${Math.round(value / 1e3)} k`;
  return String(Math.round(value));
}

/** The line as shown: label, how far, units a second, time left where the end is known. */
export function progressLine(
  label: string,
  unit: string,
  done: number,
  total: number | null,
  elapsedMs: number,
): string {
  const seconds = elapsedMs / 1000;
  const rate = seconds > 0 ? done / seconds : 0;
  const pace = rate > 0 ? `, ${count(rate)} ${unit}/s` : '';
  if (total === null || total <= 0) return `${label}: ${count(done)} ${unit}${pace}`;
  const share = Math.min(1, done / total);
  const left = share > 0 && share < 1 && seconds > 1 ? `, ${clockText((seconds * (1 - share)) / share)} left` : '';
  return `${label}: ${Math.floor(share * 100)} %${pace}${left}`;
}

/**
 * A progress line on standard error, redrawn at most eight times a second; silent when that is no terminal.
 *
 * unit  what `done` counts, for the pace ("rows", "fits")
 */
export function createProgress(label: string, unit = 'rows'): Progress {
  const stream = process.stderr;
  if (!stream.isTTY) return { update: () => {}, end: () => {} };
  const startedMs = Date.now();
  let drawnMs = 0;
  let isDrawn = false;
  return {
    update(done, total) {
      const now = Date.now();
      if (now - drawnMs < REDRAW_MS) return;
      drawnMs = now;
      isDrawn = true;
      stream.write(`\r\x1b[K${progressLine(label, unit, done, total, now - startedMs).slice(0, stream.columns || 80)}`);
    },
    end() {
      if (isDrawn) stream.write('\r\x1b[K');
      isDrawn = false;
    },
  };
}
