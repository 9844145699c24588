/**
 * Moments of any bank over all the origins that factors hold: the same sums that identify/moments.ts gathers from readings,
 * each run's origins from its second tick to a horizon before its last. All is worked out in the channels' units about their
 * offsets, and brought to the wanted scalings at the end, where it is exact.
 */
import type { Round } from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';
import { type Bank, featureCount } from '../identify/bank.ts';
import type { Moments } from '../identify/moments.ts';
import { flattenPoles } from '../identify/poles.ts';
import type { Scaling } from '../identify/scaling.ts';
import { scaleToAll } from './availability.ts';
import type { Factors } from './factors.ts';
import { type LagGrid, layGrid } from './lag-grid.ts';
import { addLagsAndLevels } from './level-sums.ts';
import { PairSums, pathsOf } from './pair-sums.ts';
import { type PoleShape, productsOfPoles } from './pole-sums.ts';
import { crossSums, type RecursiveSums } from './recursive-sums.ts';

/** What moments are wanted of. */
export interface MomentsWish {
  readonly bank: Bank;
  readonly horizon: number;
  /** (nc). */
  readonly scalings: readonly Scaling[];
  readonly signalCount: number;
  readonly round: Round | null;
}

/** Share of a change that may be left of it, in the slowest memory, at the furthest lag. */
const MOST_LEFT = 2e-3;
/** Longest ring lag that factors serve; banks have none beyond. */
export const LONGEST_LAG = 72;

/**
 * Places of the lags that factors of a shape are kept at.
 *
 * shapes  as LagGrid
 * units   ticks
 * throws  nothing
 * source  moments ask for lags up to horizon, two rounds and ring lags one by one
 * cost    O(places)
 */
export function gridOf({
  reach,
  longestHorizon,
  longestRound,
}: Pick<Factors, 'reach' | 'longestHorizon' | 'longestRound'>): LagGrid {
  return layGrid(reach, longestHorizon + 2 * longestRound + LONGEST_LAG + 2);
}

/**
 * Moments of a bank over the factors.
 *
 * shapes  as Moments; origins is the sum of their weights where old ticks weigh less
 * units   standardised by `scalings`; sums over origins
 * throws  TrainError 'factors' if horizon, round or a lag reaches further than the factors
 * source  own derivation, stated in pair-sums.ts and pole-sums.ts; checked in the tests against sums over the readings
 * cost    O(nc² places F + nc p (H + W) + p²), whatever the length of the history
 */
export function momentsFromFactors(factors: Factors, wish: MomentsWish): Moments {
  checkReach(factors, wish);
  const { bank, horizon, scalings, signalCount } = wish;
  const nc = factors.names.length;
  const grid = gridOf(factors);
  const poles = flattenPoles(bank);
  const perChannel = bank.decays.length + 2 * bank.resonators.length;
  const growth = factors.halfLifeTicks === null ? 1 : 2 ** (1 / factors.halfLifeTicks);
  checkMemories(factors, bank);
  const round = wish.round?.ticks ?? 0;
  const roundWeights = Float64Array.from({ length: nc }, (_, c) =>
    c < signalCount ? (wish.round?.weight[c] ?? 0) : 0,
  );
  const furthest = horizon + 2 * round + LONGEST_LAG + 1;
  const shape = { factors, grid, horizon, round, roundWeights, growth, furthest };
  const poleShape: PoleShape = { poles, channels: nc, perChannel, growth };
  const paths = pathsOf(factors, grid, furthest + 1);
  const pairs = new PairSums(shape, paths);
  const recursive = crossSums(shape, poleShape, pairs, paths);
  const out = emptyMoments(nc * featureCount(bank), signalCount * horizon, pairs.origins());
  placeRecursive(out, shape.horizon, signalCount, poleShape, featureCount(bank), recursive);
  const means = scalings.map(({ mean }, c) => {
    const offset = Number.isNaN(factors.offsets[c]) ? mean : factors.offsets[c];
    return (1 - roundWeights[c]) * (mean - offset);
  });
  addLagsAndLevels({ shape, poleShape, pairs, paths, recursive, bank, signalCount, means, out });
  const layout = { channels: nc, signalCount, features: featureCount(bank), horizon };
  scaleToAll(out, pairs.counts(), layout);
  rescale(out, scalings, featureCount(bank), signalCount, horizon);
  return out;
}

function checkReach(factors: Factors, { bank, horizon, round, scalings }: MomentsWish): void {
  const refuse = (what: string, got: number, most: number): never => {
    throw new TrainError(
      'factors',
      `the factors of ${factors.site} hold ${what} up to ${most} ticks, asked for ${got}; learn from the history itself, ` +
        'or gather factors anew for the site as it is now',
      { details: { got, most } },
    );
  };
  if (scalings.length !== factors.names.length)
    throw new RangeError(`${scalings.length} scalings of ${factors.names.length}.`);
  if (horizon > factors.longestHorizon) refuse('horizons', horizon, factors.longestHorizon);
  const lag = Math.max(0, ...bank.lags);
  if (lag >= LONGEST_LAG) refuse('ring lags', lag, LONGEST_LAG - 1);
  if (round === null) return;
  // A round goes on for as long after a run's end, of which nothing is known where runs rang out.
  if (factors.rungOut !== null) refuse('rounds', round.ticks, 0);
  if (round.ticks > factors.longestRound) refuse('rounds', round.ticks, factors.longestRound);
  if (round.ticks < horizon) throw new RangeError(`A round of ${round.ticks} ticks is shorter than the horizon.`);
}

function checkMemories(factors: Factors, bank: Bank): void {
  const { halfLifeTicks, site, reach } = factors;
  const slowest = slowestMemory(bank);
  if (reachesMemories(factors, bank)) return;
  const isFaded = halfLifeTicks !== null && slowest > halfLifeTicks;
  const what = isFaded
    ? `have a half-life of ${halfLifeTicks} ticks, shorter than`
    : `reach ${reach} ticks, too few for`;
  const mend = isFaded ? 'with a longer half-life, or none' : 'for a site of fewer signals';
  throw new TrainError(
    'factors',
    `the factors of ${site} ${what} the ${Math.round(slowest)} ticks that the slowest feature remembers; gather them anew ${mend}`,
    { details: { halfLifeTicks, reach, memory: slowest } },
  );
}

/**
 * Whether factors serve a bank's memories: what one still holds at the furthest lag is little, and old ticks do not fade faster
 * than it does, since sums would then be differences of numbers that grow without end.
 *
 * shapes  none
 * units   none
 * throws  nothing
 * source  with 0.2 % left out, features of the slowest memories still agree to a few thousandths, as measured
 * cost    trivial
 */
export function reachesMemories({ halfLifeTicks, reach }: Factors, bank: Bank): boolean {
  const slowest = slowestMemory(bank);
  return slowest * -Math.log(MOST_LEFT) <= reach && (halfLifeTicks === null || slowest <= halfLifeTicks);
}

function slowestMemory({ decays, resonators }: Bank): number {
  const radii = [...decays, ...resonators.map(([re, im]) => Math.hypot(re, im))];
  return radii.reduce((most, radius) => Math.max(most, -1 / Math.log(radius)), 0);
}

function emptyMoments(p: number, width: number, origins: number): Moments {
  return {
    origins,
    features: new Float64Array(p * p),
    future: new Float64Array(p * width),
    energy: new Float64Array(width),
    featureSums: new Float64Array(p),
    futureSums: new Float64Array(width),
  };
}

/** Lays the recursive features' sums where the bank has them. */
function placeRecursive(
  out: Moments,
  horizon: number,
  signalCount: number,
  poleShape: PoleShape,
  features: number,
  recursive: RecursiveSums,
): void {
  const { channels, perChannel } = poleShape;
  const p = channels * features;
  const q = channels * perChannel;
  const width = signalCount * horizon;
  const products = productsOfPoles(poleShape, recursive);
  for (let c = 0; c < channels; c++) {
    for (let f = 0; f < perChannel; f++) {
      const row = c * features + f;
      const from = c * perChannel + f;
      for (let d = 0; d < channels; d++) {
        const at = from * q + d * perChannel;
        out.features.set(products.subarray(at, at + perChannel), row * p + d * features);
      }
      for (let i = 0; i < signalCount; i++) {
        let sum = 0;
        for (let k = 0; k < horizon; k++) {
          sum += recursive.ahead[(k * signalCount + i) * q + from];
          out.future[row * width + i * horizon + k] = sum;
        }
      }
    }
  }
}

/** Divides each channel's features and future by its scale. */
function rescale(
  out: Moments,
  scalings: readonly Scaling[],
  features: number,
  signalCount: number,
  horizon: number,
): void {
  const p = scalings.length * features;
  const width = signalCount * horizon;
  for (let row = 0; row < p; row++) {
    const own = 1 / scalings[Math.floor(row / features)].scale;
    out.featureSums[row] *= own;
    for (let col = 0; col < p; col++) {
      out.features[row * p + col] *= own / scalings[Math.floor(col / features)].scale;
    }
    for (let k = 0; k < width; k++) {
      out.future[row * width + k] *= own / scalings[Math.floor(k / horizon)].scale;
    }
  }
  for (let k = 0; k < width; k++) {
    const { scale } = scalings[Math.floor(k / horizon)];
    out.energy[k] /= scale * scale;
    out.futureSums[k] /= scale;
  }
}
