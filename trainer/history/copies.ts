/**
 * Signals that are copies of one another: the same values at the same ticks, so one of them teaches nothing.
 */
import { counted, type Finding, percent } from './finding.ts';
import type { Series } from './series.ts';

/** Share of common ticks that may differ: a copy sampled a moment later. */
const MOST_DIFFERENT = 0.001;
const FEWEST_COMMON = 100;

/** Common ticks of two signals, and how many differ; stops early once they are no copies. */
function compare(a: Float64Array, b: Float64Array): { common: number; different: number } | null {
  let common = 0;
  let different = 0;
  const most = a.length * MOST_DIFFERENT;
  for (let n = 0; n < a.length; n++) {
    const x = a[n] as number;
    const y = b[n] as number;
    if (Number.isNaN(x) || Number.isNaN(y)) continue;
    common++;
    if (x !== y && ++different > most) return null;
  }
  return common >= FEWEST_COMMON && different <= common * MOST_DIFFERENT ? { common, different } : null;
}

/** isStill  by channel: constant or nearly so, where equal values mean nothing */
export function copyFindings(series: Series, isStill: readonly boolean[]): Finding[] {
  const found: Finding[] = [];
  for (let a = 0; a < series.values.length; a++) {
    for (let b = a + 1; b < series.values.length; b++) {
      if (isStill[a] || isStill[b]) continue;
      const same = compare(series.values[a] as Float64Array, series.values[b] as Float64Array);
      if (same === null) continue;
      found.push({
        kind: 'copies',
        weight: 'look',
        signal: series.names[b] as string,
        from: null,
        to: null,
        count: same.common,
        sentence: `${series.names[b]} is a copy of ${series.names[a]}: ${same.different === 0 ? 'the same' : `${percent(1 - same.different / same.common)} the same`} over ${counted(same.common, 'common tick')}.`,
        advice: 'Leave one of them out, or check that both columns come from the sensors they are named after.',
      });
    }
  }
  return found;
}
