/**
 * What a dense model is to forecast: the learned map taken apart into what a recursion can carry (means and resonators),
 * what is read off directly (levels), and what single readings add to the first steps (lags of the signal itself). What
 * the map says by lags beyond those steps, or by lags of other channels, is put onto the rest by regression.
 */
import { type Bank, featureCount } from '../identify/bank.ts';
import type { Block } from '../identify/moments.ts';
import { recursionInput } from '../identify/recursion-moments.ts';
import type { Layout } from '../identify/ridge.ts';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';
import type { DenseTarget } from '../quantise/dense.ts';
import type { Learned } from '../quantise/quantise.ts';

/** Share of what channels moving each by itself would give, added to the readings' own moments. */
const ALONE_SHARE = 0.03;
/** Steps that lags add to; they cost a byte a step, signal and lag, and say little of what lies further ahead. */
const MOST_LAG_STEPS = 6;

/**
 * The target of a learned map.
 *
 * shapes  values (nc) of (ticks), complete; blocks of the origins that moments are taken over
 * units   standardised
 * throws  TrainError 'fit' if the features' covariance is not positive definite
 * source  regression on a part of the features, from their covariance
 * cost    one pass over the readings, and O(p³/6 + p² ny steps) where there are lags
 */
export function denseTarget(
  learned: Learned,
  bank: Bank,
  values: readonly Float64Array[],
  blocks: readonly Block[],
): DenseTarget {
  const { layout } = learned;
  const { channelCount: nc, featureCount: F } = layout;
  const width = layout.signalCount * layout.steps;
  const recursive = bank.decays.length + 2 * bank.resonators.length;
  const hasLevel = bank.hasLevel === true;
  const channels = Array.from({ length: nc }, (_, c) => c);
  const rows = channels.flatMap((c) => Array.from({ length: recursive }, (_, f) => c * F + f));
  const levels = hasLevel ? channels.map((c) => c * F + recursive) : [];
  const lagPart = lagRows(learned.map, layout, bank);
  const map =
    bank.lags.length > 0 ? withoutLags(learned, [...rows, ...levels], bank, stepsOf(lagPart, layout)) : learned.map;
  return {
    input: recursionInput(values, blocks, bank, ALONE_SHARE),
    layout: { ...layout, featureCount: featureCount({ ...bank, lags: [], hasLevel: false }) },
    map: pickRows(map, rows, width),
    levelMap: hasLevel ? pickRows(map, levels, width) : null,
    ...lagPart,
  };
}

/** Each signal's own lags as far ahead as the map uses any, at most MOST_LAG_STEPS. */
function lagRows(map: Float64Array, layout: Layout, { lags }: Bank): Pick<DenseTarget, 'lags' | 'lagged'> {
  const { signalCount: ny, featureCount: F, steps } = layout;
  const L = lags.length;
  const weight = (i: number, h: number, k: number): number => map[(i * F + F - L + k) * ny * steps + i * steps + h];
  let last = 0;
  for (let i = 0; i < ny; i++) {
    for (let h = last; h < Math.min(MOST_LAG_STEPS, steps); h++) {
      for (let k = 0; k < L; k++) if (weight(i, h, k) !== 0) last = h + 1;
    }
  }
  const lagged = new Float64Array(ny * last * L);
  for (let row = 0; row < ny * last; row++) {
    for (let k = 0; k < L; k++) lagged[row * L + k] = weight(Math.floor(row / last), row % last, k);
  }
  return { lags: last > 0 ? lags : [], lagged };
}

function stepsOf({ lags, lagged }: Pick<DenseTarget, 'lags' | 'lagged'>, { signalCount }: Layout): number {
  return lags.length === 0 ? 0 : lagged.length / (signalCount * lags.length);
}

/** The map with what lags say elsewhere put onto the kept features: S_kk G = S_kl M_l is added to it. */
function withoutLags(
  { covariance, map, layout }: Learned,
  kept: readonly number[],
  { lags }: Bank,
  ownSteps: number,
): Float64Array {
  const { channelCount: nc, signalCount: ny, featureCount: F, steps } = layout;
  const [p, width, L] = [nc * F, ny * steps, lags.length];
  const lagged = Array.from({ length: nc * L }, (_, k) => Math.floor(k / L) * F + F - L + (k % L));
  const said = pickRows(map, lagged, width);
  lagged.forEach((_, row) => {
    const c = Math.floor(row / L);
    if (c < ny) said.fill(0, row * width + c * steps, row * width + c * steps + ownSteps);
  });
  if (said.every((value) => value === 0)) return map;
  const n = kept.length;
  const gram = new Float64Array(n * n);
  const shared = new Float64Array(n * lagged.length);
  kept.forEach((row, a) => {
    kept.forEach((col, b) => {
      gram[a * n + b] = covariance[row * p + col];
    });
    lagged.forEach((col, b) => {
      shared[a * lagged.length + b] = covariance[row * p + col];
    });
  });
  const put = multiply(shared, said, n, lagged.length, width);
  solveCholesky(cholesky(gram, n), n, put, width);
  const out = map.slice();
  kept.forEach((row, a) => {
    for (let j = 0; j < width; j++) out[row * width + j] += put[a * width + j];
  });
  return out;
}

function pickRows(from: Float64Array, rows: readonly number[], cols: number): Float64Array {
  const out = new Float64Array(rows.length * cols);
  rows.forEach((row, k) => {
    out.set(from.subarray(row * cols, (row + 1) * cols), k * cols);
  });
  return out;
}
