/**
 * What a dense model is to forecast: the learned map taken apart into what a recursion can carry (means and resonators),
 * what is read off directly (levels), and what single readings add to the first steps (lags of the signal itself).
 */
import { type Bank, featureCount } from '../identify/bank.ts';
import type { Block } from '../identify/moments.ts';
import { recursionInput } from '../identify/recursion-moments.ts';
import type { Layout } from '../identify/ridge.ts';
import type { DenseTarget } from '../quantise/dense.ts';
import type { Learned } from '../quantise/quantise.ts';

/** Share of what channels moving each by itself would give, added to the readings' own moments. */
const ALONE_SHARE = 0.03;

/**
 * The target of a learned map.
 *
 * shapes  values (nc) of (ticks), complete; blocks of the origins that moments are taken over
 * units   standardised
 * throws  nothing
 * source  none
 * cost    one pass over the readings
 */
export function denseTarget(
  { layout, map }: Learned,
  bank: Bank,
  values: readonly Float64Array[],
  blocks: readonly Block[],
): DenseTarget {
  const { channelCount: nc, featureCount: F } = layout;
  const width = layout.signalCount * layout.steps;
  const recursive = bank.decays.length + 2 * bank.resonators.length;
  const hasLevel = bank.hasLevel === true;
  const channels = Array.from({ length: nc }, (_, c) => c);
  const rows = channels.flatMap((c) => Array.from({ length: recursive }, (_, f) => c * F + f));
  return {
    input: recursionInput(values, blocks, bank, ALONE_SHARE),
    layout: { ...layout, featureCount: featureCount({ ...bank, lags: [], hasLevel: false }) },
    map: pickRows(map, rows, width),
    levelMap: hasLevel
      ? pickRows(
          map,
          channels.map((c) => c * F + recursive),
          width,
        )
      : null,
    ...lagRows(map, layout, bank),
  };
}

/** Each signal's own lags as far ahead as the map uses any; a map that uses lags of others loses those. */
function lagRows(map: Float64Array, layout: Layout, { lags }: Bank): Pick<DenseTarget, 'lags' | 'lagged'> {
  const { signalCount: ny, featureCount: F, steps } = layout;
  const L = lags.length;
  const weight = (i: number, h: number, k: number): number => map[(i * F + F - L + k) * ny * steps + i * steps + h];
  let last = 0;
  for (let i = 0; i < ny; i++) {
    for (let h = last; h < steps; h++) for (let k = 0; k < L; k++) if (weight(i, h, k) !== 0) last = h + 1;
  }
  const lagged = new Float64Array(ny * last * L);
  for (let row = 0; row < ny * last; row++) {
    for (let k = 0; k < L; k++) lagged[row * L + k] = weight(Math.floor(row / last), row % last, k);
  }
  return { lags: last > 0 ? lags : [], lagged };
}

function pickRows(from: Float64Array, rows: readonly number[], cols: number): Float64Array {
  const out = new Float64Array(rows.length * cols);
  rows.forEach((row, k) => {
    out.set(from.subarray(row * cols, (row + 1) * cols), k * cols);
  });
  return out;
}
