/**
 * How many states and curves a dense model gets: as many as the bytes allow, unless fewer do as well on the calibration
 * part. What cutting costs follows the singular values cut off, by a share worked out at a few orders; only a few sizes are
 * rounded and judged on readings the map was not learned from.
 */
import { findCurves, fullReadout } from '../identify/horizon-basis.ts';
import type { Block } from '../identify/moments.ts';
import type { Balanced, Reduced } from '../identify/reduce.ts';
import { trialSteps } from '../identify/step-groups.ts';
import { transpose } from '../linalg/products.ts';
import { type DenseFactors, type DenseTarget, denseBytes, denseMoments, roundedDense } from '../quantise/dense.ts';

/** A size of the dense model. */
export interface DenseSize {
  readonly order: number;
  readonly basisCount: number;
}

/** The reduction of an order, not improved; null where it has no modal form. Asked for the same orders again and again. */
export type Cut = (order: number) => Reduced | null;

/** What sizes are judged on: readings the map was not learned from. */
export interface JudgedPart {
  /** (nc) of (ticks), complete, standardised. */
  readonly values: readonly Float64Array[];
  readonly blocks: readonly Block[];
}

/** Shares of the bytes tried, from small to the whole. */
const SHARES = [0.15, 0.3, 0.5, 0.75, 1] as const;
/** Sizes that fill the bytes and are judged; one alone at smaller shares. */
const FINALISTS = 2;
const BASES = [1, 2, 3, 4, 5, 6, 7, 8, 10, 12, 14, 16, 18, 20, 22, 24] as const;
/** More states than these never paid within the bytes met. */
const MOST_STATES = 160;
/** Orders, as shares of the largest that fits, at which the error of cutting is worked out. */
const SOUNDED = [0.12, 0.4, 1] as const;
/** A smaller size is preferred where its error on the judged part is within this share of the best … */
const TIE = 0.001;
/** … and it either gives up less than this share of the forecast more than the largest, or beats it by that gain. */
const LOST_SHARE = 0.002;
const CLEAR_GAIN = 0.005;

/**
 * Chooses the size; null where no order has a modal form within the bytes.
 *
 * shapes  none
 * units   tensorBytes: what the tensors may take
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    some ten reductions, and one run of the judged part a size
 */
export function chooseDenseSize(
  target: DenseTarget,
  balanced: Balanced,
  cut: Cut,
  judged: JudgedPart,
  tensorBytes: number,
): DenseSize | null {
  const lost = soundings(target, balanced, cut, tensorBytes);
  if (lost === null) return null;
  const sizes = SHARES.flatMap((share) =>
    frontier(target, lost, share * tensorBytes, share === 1 ? FINALISTS : 1),
  ).filter((size, at, all) => all.findIndex((other) => isSame(size, other)) === at);
  const tried = sizes.flatMap((size) => {
    const reduced = cut(size.order);
    if (reduced === null) return [];
    const { factors } = roundedDense(target, reduced.recursion, size.basisCount);
    return [{ size, lost: lost.of(size), error: judgedError(factors, target, judged) }];
  });
  if (tried.length === 0) return null;
  const best = Math.min(...tried.map(({ error }) => error));
  const finalists = tried.slice(-FINALISTS);
  const largest = finalists.reduce((least, one) => (one.error < least.error ? one : least));
  const good = tried.find(({ error, lost: own }) => {
    const isSmallLoss = own < largest.lost + LOST_SHARE * balanced.energy;
    return error <= best * (1 + TIE) && (isSmallLoss || error < largest.error * (1 - CLEAR_GAIN));
  });
  return (good ?? largest).size;
}

function isSame(a: DenseSize, b: DenseSize): boolean {
  return a.order === b.order && a.basisCount === b.basisCount;
}

/** Energy of the weighted forecast that a size gives up. */
interface Soundings {
  readonly largestOrder: number;
  of(size: DenseSize): number;
}

function soundings(target: DenseTarget, { values, rank }: Balanced, cut: Cut, bytes: number): Soundings | null {
  let most = Math.min(MOST_STATES, rank);
  while (most > 1 && denseBytes(target, most, 1) > bytes) most--;
  const points: Sounding[] = [];
  let curves: Float64Array | null = null;
  for (const order of new Set(SOUNDED.map((share) => Math.max(1, Math.round(share * most))))) {
    const reduced = cut(order);
    if (reduced === null) continue;
    points.push({ order, share: reduced.error / tail(values, order) });
    curves = curveEnergy(target, reduced.recursion);
  }
  if (curves === null) return null;
  const energy = curves;
  return {
    largestOrder: points[points.length - 1].order,
    of: ({ order, basisCount }) => shareAt(points, order) * tail(values, order) + sumFrom(energy, basisCount),
  };
}

/** The error of an order, as a share of the squared Hankel singular values cut off. */
interface Sounding {
  readonly order: number;
  readonly share: number;
}

/** Sum of squares from the order on; never zero. */
function tail(values: Float64Array, order: number): number {
  let sum = values[0] * values[0] * 1e-30 + Number.MIN_VALUE;
  for (let k = order; k < values.length; k++) sum += values[k] * values[k];
  return sum;
}

function curveEnergy(target: DenseTarget, recursion: Parameters<typeof denseMoments>[1]): Float64Array {
  const moments = denseMoments(target, recursion);
  const n = Math.round(Math.sqrt(moments.covariance.length));
  return findCurves(fullReadout(moments, n, target.layout), moments.covariance, n, target.layout).energy;
}

/** The share at an order: straight between two soundings, level beyond them. */
function shareAt(points: readonly Sounding[], order: number): number {
  const above = points.findIndex((point) => point.order >= order);
  if (above < 0) return points[points.length - 1].share;
  const high = points[above];
  if (above === 0) return high.share;
  const low = points[above - 1];
  return low.share + ((order - low.order) / (high.order - low.order)) * (high.share - low.share);
}

function sumFrom(values: Float64Array, from: number): number {
  let sum = 0;
  for (let k = from; k < values.length; k++) sum += values[k];
  return sum;
}

/** The sizes within the bytes that lose least, at most `count`, the best first. */
function frontier(target: DenseTarget, lost: Soundings, bytes: number, count: number): DenseSize[] {
  const sizes: DenseSize[] = [];
  for (const basisCount of BASES) {
    if (basisCount > target.layout.steps) break;
    let order = lost.largestOrder;
    while (order > 0 && denseBytes(target, order, basisCount) > bytes) order--;
    if (order > 0) sizes.push({ order, basisCount });
  }
  return sizes.sort((a, b) => lost.of(a) - lost.of(b)).slice(0, count);
}

/** Mean squared error over signals and trial steps, by running the recursion over the readings. */
function judgedError(factors: DenseFactors, { layout }: DenseTarget, { values, blocks }: JudgedPart): number {
  const { signalCount: ny, steps: horizon } = layout;
  const { steps } = trialSteps(horizon);
  const rows = stepRows(factors, ny, steps);
  const n = rows.length / (ny * steps.length);
  let sum = 0;
  let count = 0;
  run(factors, values, blocks, (t, seen) => {
    for (let i = 0; i < ny; i++) {
      const now = values[i][t];
      for (let s = 0; s < steps.length; s++) {
        const at = (i * steps.length + s) * n;
        let change = 0;
        for (let k = 0; k < n; k++) change += rows[at + k] * seen[k];
        change += laggedPart(factors, ny, values[i], i, t, steps[s]);
        const error = now + change - values[i][t + steps[s]];
        sum += error * error;
        count++;
      }
    }
  });
  return count > 0 ? sum / count : 0;
}

/** What the lags of a signal add at a step; before the first reading it stood still. */
function laggedPart(
  { lags, lagged }: DenseFactors,
  ny: number,
  y: Float64Array,
  signal: number,
  t: number,
  step: number,
): number {
  const L = lags.length;
  const S = L === 0 ? 0 : lagged.length / (ny * L);
  if (step > S) return 0;
  let sum = 0;
  for (let k = 0; k < L; k++) sum += lagged[(signal * S + step - 1) * L + k] * (y[Math.max(0, t - lags[k])] - y[t]);
  return sum;
}

/** (ny·steps × seen) read-out at some steps. */
function stepRows(factors: DenseFactors, ny: number, steps: readonly number[]): Float64Array {
  const { basisCount: r, readout, horizonBasis } = factors;
  const n = readout.length / (ny * r);
  const out = new Float64Array(ny * steps.length * n);
  for (let i = 0; i < ny; i++) {
    steps.forEach((h, s) => {
      const at = (i * steps.length + s) * n;
      for (let b = 0; b < r; b++) {
        const weight = horizonBasis[(h - 1) * r + b];
        const from = (i * r + b) * n;
        for (let k = 0; k < n; k++) out[at + k] += weight * readout[from + k];
      }
    });
  }
  return out;
}

/** Runs the recursion from the first reading on, and visits the blocks' origins with what the read-out sees. */
function run(
  { order, pairCount, poles, drive, hasLevel }: DenseFactors,
  values: readonly Float64Array[],
  blocks: readonly Block[],
  visit: (t: number, seen: Float64Array) => void,
): void {
  const nc = values.length;
  const seen = new Float64Array(order + (hasLevel === true ? nc : 0));
  const rows = transpose(drive, order, nc);
  let t = 0;
  for (const { fromIndex, toIndex } of blocks) {
    while (t < toIndex - 1) {
      t++;
      let k = 0;
      for (; k < 2 * pairCount; k += 2) {
        const [u, v] = [seen[k], seen[k + 1]];
        seen[k] = poles[k] * u - poles[k + 1] * v;
        seen[k + 1] = poles[k] * v + poles[k + 1] * u;
      }
      for (; k < order; k++) seen[k] *= poles[k];
      for (let c = 0; c < nc; c++) {
        const change = values[c][t] - values[c][t - 1];
        for (k = 0; k < order; k++) seen[k] += rows[c * order + k] * change;
        if (seen.length > order) seen[order + c] = -values[c][t];
      }
      if (t >= fromIndex) visit(t, seen);
    }
  }
}
