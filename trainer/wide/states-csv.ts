/** States as a CSV file that `stillwell site` and `stillwell fit` read like any other history. */
import type { StateSeries } from './condense-states.ts';

/** Digits of a state: its spread is about 1, and its noise far above the seventh. */
const DIGITS = 6;

/** A head of time, x1 … and a line a tick; times in ISO 8601, UTC. */
export function statesCsv({ order, timesMs, values }: StateSeries): string {
  const lines = [['time', ...Array.from({ length: order }, (_, k) => `x${k + 1}`)].join(',')];
  for (let i = 0; i < timesMs.length; i++) {
    const cells = Array.from(values.subarray(i * order, (i + 1) * order), (value) => value.toFixed(DIGITS));
    lines.push(`${new Date(Math.round(timesMs[i])).toISOString()},${cells.join(',')}`);
  }
  return `${lines.join('\n')}\n`;
}
