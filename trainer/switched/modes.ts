/**
 * Modes of a plant: which settings its switched equipment is seen in, all near-discrete signals taken together.
 */
import { findLevels, type Levels, nearestLevel } from './levels.ts';

/** Modes found in the learning part. */
export interface Modes {
  readonly count: number;
  /** (k) signals that show them. */
  readonly discrete: readonly number[];
  /** (count × k) standardised, and (k). */
  readonly centre: Float64Array;
  readonly spread: Float64Array;
  /** (T) of the whole history: the mode, −1 where a near-discrete signal is not read. */
  readonly of: Int8Array;
}

const MOST_MODES = 8;
/** Ticks and share of the learning part below which a combination is pooled with its nearest. */
const LEAST_TICKS = 24;
const LEAST_SHARE = 0.0003;
/** A signal adds nothing to the modes where the others tell its level at this share of ticks. */
const TOLD_SHARE = 0.98;
/** Gap in spreads from which such a signal is still near-discrete rather than driven. */
const CLEAR_CONTRAST = 20;

/**
 * Finds the modes; null where no signal is near-discrete.
 *
 * shapes  values, isRead (nc) of (T); signals the first signalCount
 * units   standardised
 * throws  nothing
 * source  levels.ts; combinations seen too seldom are pooled with the nearest in spreads
 * cost    O(ny T)
 */
export function findModes(
  values: readonly Float64Array[],
  isRead: readonly Uint8Array[],
  signalCount: number,
  learnTicks: number,
): Modes | null {
  const { discrete, levels } = chooseDiscrete(values, isRead, signalCount, learnTicks);
  if (discrete.length === 0) return null;
  const k = discrete.length;
  const codeOf = (t: number): number => {
    let code = 0;
    for (let s = 0; s < k; s++) {
      if (isRead[discrete[s]][t] === 0) return -1;
      code = code * 8 + nearestLevel(levels[s].centres, values[discrete[s]][t]);
    }
    return code;
  };
  const counts = new Map<number, number>();
  for (let t = 0; t < learnTicks; t++) {
    const code = codeOf(t);
    if (code >= 0) counts.set(code, (counts.get(code) ?? 0) + 1);
  }
  const least = Math.max(LEAST_TICKS, LEAST_SHARE * learnTicks);
  const kept = [...counts]
    .filter(([, count]) => count >= least)
    .sort((a, b) => b[1] - a[1] || a[0] - b[0])
    .slice(0, MOST_MODES)
    .map(([code]) => code)
    .sort((a, b) => a - b);
  if (kept.length < 2) return null;
  const centre = new Float64Array(kept.length * k);
  kept.forEach((code, m) => {
    for (let s = k - 1, rest = code; s >= 0; s--, rest = Math.floor(rest / 8)) {
      centre[m * k + s] = levels[s].centres[rest % 8];
    }
  });
  const spread = Float64Array.from(levels, (level) => Math.max(level.spread, 1e-3));
  const of = new Int8Array(values[0].length).fill(-1);
  for (let t = 0; t < of.length; t++) {
    if (codeOf(t) >= 0) of[t] = nearestMode(centre, spread, kept.length, k, (s) => values[discrete[s]][t]);
  }
  return { count: kept.length, discrete, centre, spread, of };
}

/**
 * Near-discrete signals, those of the clearest levels first looked at. One whose level the others already tell is kept
 * where it hardly moves within a level; else it is left to be driven by the modes.
 */
function chooseDiscrete(
  values: readonly Float64Array[],
  isRead: readonly Uint8Array[],
  signalCount: number,
  learnTicks: number,
): { readonly discrete: readonly number[]; readonly levels: readonly Levels[] } {
  const found: { readonly signal: number; readonly levels: Levels; readonly code: Int8Array }[] = [];
  for (let i = 0; i < signalCount; i++) {
    const levels = findLevels(values[i].subarray(0, learnTicks), isRead[i].subarray(0, learnTicks));
    if (levels === null) continue;
    const code = Int8Array.from({ length: learnTicks }, (_, t) =>
      isRead[i][t] === 1 ? nearestLevel(levels.centres, values[i][t]) : -1,
    );
    found.push({ signal: i, levels, code });
  }
  found.sort((a, b) => b.levels.contrast - a.levels.contrast || a.signal - b.signal);
  const kept: typeof found = [];
  for (const candidate of found) {
    const codes = kept.map((one) => one.code);
    const isTold = kept.length > 0 && toldShare(codes, candidate.code) >= TOLD_SHARE;
    if (!isTold || candidate.levels.contrast >= CLEAR_CONTRAST) kept.push(candidate);
  }
  kept.sort((a, b) => a.signal - b.signal);
  return { discrete: kept.map((one) => one.signal), levels: kept.map((one) => one.levels) };
}

/** Share of ticks at which a level is the most frequent one for what the others show. */
function toldShare(others: readonly Int8Array[], code: Int8Array): number {
  const counts = new Map<number, Float64Array>();
  let all = 0;
  for (let t = 0; t < code.length; t++) {
    let key = 0;
    for (const other of others) key = other[t] < 0 || key < 0 ? -1 : key * 8 + other[t];
    if (key < 0 || code[t] < 0) continue;
    let row = counts.get(key);
    if (row === undefined) {
      row = new Float64Array(8);
      counts.set(key, row);
    }
    row[code[t]]++;
    all++;
  }
  let most = 0;
  for (const row of counts.values()) most += Math.max(...row);
  return all === 0 ? 1 : most / all;
}

function nearestMode(
  centre: Float64Array,
  spread: Float64Array,
  count: number,
  k: number,
  valueAt: (s: number) => number,
): number {
  let best = 0;
  let least = Number.POSITIVE_INFINITY;
  for (let m = 0; m < count; m++) {
    let distance = 0;
    for (let s = 0; s < k; s++) distance += ((valueAt(s) - centre[m * k + s]) / spread[s]) ** 2;
    if (distance < least) {
      least = distance;
      best = m;
    }
  }
  return best;
}
