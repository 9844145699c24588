/**
 * Ticks without a reading: gaps of the whole history, and what single signals miss beside them.
 */
import { counted, type Finding, iso, lengthOf, percent } from './finding.ts';
import type { Series } from './series.ts';

const LOOK_SHARE = 0.05;
const SERIOUS_SHARE = 0.3;

/** Runs of ticks for which `isMissing` holds. */
interface Runs {
  count: number;
  ticks: number;
  longest: number;
  longestAt: number;
}

function runsOf(ticks: number, isMissing: (tick: number) => boolean): Runs {
  const runs: Runs = { count: 0, ticks: 0, longest: 0, longestAt: 0 };
  let length = 0;
  for (let n = 0; n <= ticks; n++) {
    if (n < ticks && isMissing(n)) {
      length++;
      continue;
    }
    if (length === 0) continue;
    runs.count++;
    runs.ticks += length;
    if (length > runs.longest) {
      runs.longest = length;
      runs.longestAt = n - length;
    }
    length = 0;
  }
  return runs;
}

function gapFinding(series: Series, name: string | null, runs: Runs): Finding {
  const share = runs.ticks / series.ticks;
  const from = (series.firstTick + runs.longestAt) * series.tickMs;
  const to = from + runs.longest * series.tickMs;
  const who =
    name === null
      ? 'The history has no reading at all'
      : `${name} ${name.includes(', ') ? 'have' : 'has'} no reading, while others have,`;
  return {
    kind: name === null ? 'gaps' : 'missing',
    weight: share >= SERIOUS_SHARE ? 'serious' : share >= LOOK_SHARE ? 'look' : 'note',
    signal: name,
    from: iso(from),
    to: iso(to),
    count: runs.count,
    sentence: `${who} for ${counted(runs.ticks, 'tick')} (${percent(share)}) in ${counted(runs.count, 'stretch').replace('stretchs', 'stretches')}; the longest is ${lengthOf(to - from)} from ${iso(from)}.`,
    advice:
      'Missing ticks are bridged by the model itself; nothing is filled in. Look for a file left out where a gap is long.',
  };
}

/** Gaps of all signals together first, then those of single signals, signals that miss the same named together. */
export function gapFindings(series: Series): Finding[] {
  const { values, ticks, names } = series;
  const isEmpty = new Uint8Array(ticks).fill(1);
  for (const one of values) for (let n = 0; n < ticks; n++) if (!Number.isNaN(one[n])) isEmpty[n] = 0;
  const found: Finding[] = [];
  const all = runsOf(ticks, (n) => isEmpty[n] === 1);
  if (all.count > 0) found.push(gapFinding(series, null, all));
  const alike = new Map<string, { names: string[]; runs: Runs }>();
  values.forEach((one, c) => {
    const runs = runsOf(ticks, (n) => Number.isNaN(one[n]) && isEmpty[n] === 0);
    if (runs.count === 0) return;
    const key = Object.values(runs).join(' ');
    const group = alike.get(key) ?? { names: [], runs };
    group.names.push(names[c] as string);
    alike.set(key, group);
  });
  for (const group of alike.values()) found.push(gapFinding(series, group.names.join(', '), group.runs));
  return found;
}

/** Share of ticks with a reading in each of `bins` equal parts of the history, 0..1. */
export function presenceOf(values: Float64Array, bins: number): number[] {
  const width = Math.min(bins, values.length);
  return Array.from({ length: width }, (_, b) => {
    const from = Math.floor((b * values.length) / width);
    const to = Math.floor(((b + 1) * values.length) / width);
    let present = 0;
    for (let n = from; n < to; n++) if (!Number.isNaN(values[n])) present++;
    return Number((present / (to - from)).toFixed(3));
  });
}
