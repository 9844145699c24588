/**
 * Near-discrete signals: those that keep to a few levels and jump between them in a tick or two, as currents, flows and
 * states of on/off equipment do. Found by clustering in one dimension and held against how the signal moves in time: a
 * bimodal signal that drifts from one level to the other, as a room between two temperatures does, is none.
 */

/** Levels of one near-discrete signal. */
export interface Levels {
  /** Ascending, standardised. */
  readonly centres: Float64Array;
  /** Standard deviation about them. */
  readonly spread: number;
  /** Narrowest gap between neighbours, in spreads. */
  readonly contrast: number;
}

const BINS = 256;
const MOST_LEVELS = 5;
/** A jump is this many times as large as a usual change within a level, and the gap this many spreads wide. */
const JUMP_RATIO = 5;
const GAP_SPREADS = 5;
/** Between the outer percentiles of two neighbours lies at least this share of the gap between their centres. */
const EMPTY_SHARE = 0.4;
const OUTER = 0.03;
/** Ticks a stay on a level lasts at least, on average; visits and ticks of a level that make it one. */
const LEAST_STAY = 2.5;
const LEAST_VISITS = 4;
const LEAST_TICKS = 24;

/**
 * Levels of a signal, the finest division that holds; null if none does.
 *
 * shapes  z, isRead (T) of the learning part
 * units   standardised
 * throws  nothing
 * source  optimal one-dimensional k-means by dynamic programming over a histogram (Fisher, JASA 53, 1958; Wang & Song,
 *         R Journal 3, 2011), counts under a square root so that rare levels count
 * cost    O(T + levels · bins²)
 */
export function findLevels(z: Float64Array, isRead: Uint8Array): Levels | null {
  const histogram = histogramOf(z, isRead);
  if (histogram === null) return null;
  for (let count = MOST_LEVELS; count >= 2; count--) {
    const edges = divide(histogram, count);
    if (edges === null) continue;
    const levels = tested(z, isRead, edges);
    if (levels !== null) return levels;
  }
  return null;
}

/**
 * Number of the level nearest to a value.
 *
 * shapes  centres ascending
 * units   standardised
 * throws  nothing
 * source  none
 * cost    O(levels)
 */
export function nearestLevel(centres: Float64Array, value: number): number {
  let best = 0;
  for (let k = 1; k < centres.length; k++) {
    if (Math.abs(value - centres[k]) < Math.abs(value - centres[best])) best = k;
  }
  return best;
}

interface Histogram {
  readonly low: number;
  readonly width: number;
  readonly weight: Float64Array;
}

function histogramOf(z: Float64Array, isRead: Uint8Array): Histogram | null {
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let t = 0; t < z.length; t++) {
    if (isRead[t] === 0) continue;
    low = Math.min(low, z[t]);
    high = Math.max(high, z[t]);
  }
  if (!(high > low)) return null;
  const width = (high - low) / BINS;
  const weight = new Float64Array(BINS);
  for (let t = 0; t < z.length; t++) {
    if (isRead[t] === 1) weight[Math.min(BINS - 1, Math.floor((z[t] - low) / width))]++;
  }
  return { low, width, weight: weight.map(Math.sqrt) };
}

/** Upper edges of all clusters but the last, in value; null where fewer bins than clusters hold anything. */
function divide({ low, width, weight }: Histogram, count: number): number[] | null {
  const bins = weight.length;
  const sums = [new Float64Array(bins + 1), new Float64Array(bins + 1), new Float64Array(bins + 1)];
  for (let b = 0; b < bins; b++) for (let p = 0; p < 3; p++) sums[p][b + 1] = sums[p][b] + weight[b] * b ** p;
  /** Weighted scatter of bins from..to−1. */
  const scatter = (from: number, to: number): number => {
    const w = sums[0][to] - sums[0][from];
    if (w <= 0) return 0;
    const s = sums[1][to] - sums[1][from];
    return Math.max(0, sums[2][to] - sums[2][from] - (s * s) / w);
  };
  let best = Float64Array.from({ length: bins + 1 }, (_, to) => scatter(0, to));
  const from: Int32Array[] = [];
  for (let k = 1; k < count; k++) {
    const next = new Float64Array(bins + 1).fill(Number.POSITIVE_INFINITY);
    const cut = new Int32Array(bins + 1);
    for (let to = k + 1; to <= bins; to++) {
      for (let at = k; at < to; at++) {
        const value = best[at] + scatter(at, to);
        if (value < next[to]) {
          next[to] = value;
          cut[to] = at;
        }
      }
    }
    best = next;
    from.push(cut);
  }
  const edges: number[] = [];
  let to = bins;
  for (let k = count - 2; k >= 0; k--) {
    to = from[k][to];
    edges.unshift(low + width * to);
  }
  return edges.every((edge, k) => k === 0 || edge > edges[k - 1]) ? edges : null;
}

/** Levels between given edges, if each is visited often enough, kept long enough, and left and reached by jumps. */
function tested(z: Float64Array, isRead: Uint8Array, edges: readonly number[]): Levels | null {
  const count = edges.length + 1;
  const levelOf = (value: number): number => {
    let k = 0;
    while (k < edges.length && value >= edges[k]) k++;
    return k;
  };
  const sums = momentsOf(z, isRead, count, levelOf);
  const centres = new Float64Array(count);
  let inside = 0;
  let ticks = 0;
  for (let k = 0; k < count; k++) {
    if (sums.ticks[k] < LEAST_TICKS || sums.visits[k] < LEAST_VISITS) return null;
    if (sums.ticks[k] / sums.visits[k] < LEAST_STAY) return null;
    centres[k] = sums.first[k] / sums.ticks[k];
    inside += sums.second[k] - sums.ticks[k] * centres[k] * centres[k];
    ticks += sums.ticks[k];
  }
  const spread = Math.sqrt(Math.max(0, inside) / ticks);
  const change = Math.sqrt(sums.changes / Math.max(1, sums.steps));
  for (let k = 0; k + 1 < count; k++) {
    const gap = centres[k + 1] - centres[k];
    if (gap < GAP_SPREADS * spread || gap < JUMP_RATIO * change) return null;
  }
  if (!areApart(z, isRead, centres, levelOf) || !jumps(z, isRead, centres, levelOf)) return null;
  const gaps = Array.from(centres.subarray(1), (centre, k) => centre - centres[k]);
  return { centres, spread, contrast: Math.min(...gaps) / Math.max(spread, 1e-9) };
}

/** Whether little lies between neighbouring levels: one wide level cut in two has no gap. */
function areApart(
  z: Float64Array,
  isRead: Uint8Array,
  centres: Float64Array,
  levelOf: (value: number) => number,
): boolean {
  const members: number[][] = Array.from(centres, () => []);
  for (let t = 0; t < z.length; t++) if (isRead[t] === 1) members[levelOf(z[t])].push(z[t]);
  const sorted = members.map((values) => Float64Array.from(values).sort());
  return sorted.every((values, k) => {
    if (k === 0) return true;
    const below = sorted[k - 1][Math.ceil((1 - OUTER) * (sorted[k - 1].length - 1))];
    const above = values[Math.floor(OUTER * (values.length - 1))];
    return above - below >= EMPTY_SHARE * (centres[k] - centres[k - 1]);
  });
}

interface LevelSums {
  readonly ticks: Float64Array;
  readonly visits: Float64Array;
  readonly first: Float64Array;
  readonly second: Float64Array;
  /** Sum of squares and number of the changes within a level. */
  changes: number;
  steps: number;
}

function momentsOf(z: Float64Array, isRead: Uint8Array, count: number, levelOf: (value: number) => number): LevelSums {
  const sums: LevelSums = {
    ticks: new Float64Array(count),
    visits: new Float64Array(count),
    first: new Float64Array(count),
    second: new Float64Array(count),
    changes: 0,
    steps: 0,
  };
  let before = -1;
  for (let t = 0; t < z.length; t++) {
    if (isRead[t] === 0) continue;
    const level = levelOf(z[t]);
    sums.ticks[level]++;
    sums.first[level] += z[t];
    sums.second[level] += z[t] * z[t];
    if (level !== before) sums.visits[level]++;
    else if (isRead[t - 1] === 1) {
      sums.changes += (z[t] - z[t - 1]) ** 2;
      sums.steps++;
    }
    before = level;
  }
  return sums;
}

/** Whether the usual change of level is most of the way there within two ticks of its start. */
function jumps(
  z: Float64Array,
  isRead: Uint8Array,
  centres: Float64Array,
  levelOf: (value: number) => number,
): boolean {
  let changes = 0;
  let clean = 0;
  for (let t = 1; t + 1 < z.length; t++) {
    if (isRead[t - 1] + isRead[t] + isRead[t + 1] < 3) continue;
    const from = levelOf(z[t - 1]);
    if (levelOf(z[t]) === from) continue;
    changes++;
    const gap = centres[levelOf(z[t + 1])] - centres[from];
    if (gap !== 0 && Math.abs(z[t + 1] - z[t - 1]) > 0.6 * Math.abs(gap)) clean++;
  }
  return changes > 0 && clean > 0.6 * changes;
}
