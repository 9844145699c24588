/**
 * How far a fleet is, on one line of a terminal: sites done, sites under way with their step, time left. Silent where no
 * person watches.
 */
import { clockText } from '../progress.ts';

const REDRAW_MS = 200;

/** Sites as the line knows them. */
export interface FleetProgress {
  /** A site begins its next step. */
  step(label: string, step: string): void;
  /** A site is over; `isQuick` where nothing was to be done, which says nothing of the pace. */
  done(label: string, weight: number, isQuick: boolean): void;
  end(): void;
}

/**
 * The line as shown.
 *
 * share      of the work that is done, in [0, 1]
 * elapsedMs  since the start of that work
 */
export function fleetLine(
  done: number,
  total: number,
  running: ReadonlyMap<string, string>,
  share: number,
  elapsedMs: number,
): string {
  const under = [...running].map(([label, step]) => `${label} (${step})`).join(', ');
  const left = share > 0 && share < 1 ? `, about ${clockText((elapsedMs * (1 - share)) / share / 1000)} left` : '';
  return `fleet: ${done} of ${total} sites done${left}${under === '' ? '' : `; running ${under}`}`;
}

/**
 * Starts the line.
 *
 * weights  work of each site, in any one unit: time left is told by it, not by counting sites
 */
export function createFleetProgress(weights: readonly number[]): FleetProgress {
  const stream = process.stderr;
  if (!stream.isTTY) return { step: () => {}, done: () => {}, end: () => {} };
  const startedMs = Date.now();
  const running = new Map<string, string>();
  let total = weights.reduce((sum, weight) => sum + weight, 0);
  let doneWeight = 0;
  let done = 0;
  const draw = (): void => {
    const share = total > 0 ? doneWeight / total : 0;
    const line = fleetLine(done, weights.length, running, share, Date.now() - startedMs);
    stream.write(`\r\x1b[K${line.slice(0, (stream.columns || 80) - 1)}`);
  };
  // Redrawn by the clock, since a long step sends no word for minutes.
  const timer = setInterval(draw, REDRAW_MS);
  return {
    step: (label, step) => void running.set(label, step),
    done: (label, weight, isQuick) => {
      running.delete(label);
      done++;
      if (isQuick) total -= weight;
      else doneWeight += weight;
    },
    end: () => {
      clearInterval(timer);
      stream.write('\r\x1b[K');
    },
  };
}
