/**
 * How large the state and how many curves: as large as the byte limit allows, unless a smaller one does as well on the
 * calibration part. What shrinking costs is known from the covariance of the state alone; only a few sizes on the frontier
 * are judged on readings the map was not learned from.
 */

import { type Factors, floatFactors, type Learned, mapOf } from '../quantise/quantise.ts';
import { stateMoments } from './bottleneck.ts';
import { trialSteps } from './choose.ts';
import { findCurves, fullReadout } from './horizon-basis.ts';
import { pickMoments } from './moment-sets.ts';
import type { Moments } from './moments.ts';
import { mapError } from './ridge.ts';

/** A size of the small model. */
export interface Size {
  readonly order: number;
  readonly basisCount: number;
}

/** Shares of the byte limit tried, from small to the whole. */
const SHARES = [0.15, 0.3, 0.5, 0.75, 1] as const;
/** Sizes that fill the bytes and are judged on unseen readings; one alone at smaller shares. */
const FINALISTS = 5;
/** Bases tried; a basis of more curves than steps has no use. */
const BASES = [1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15, 16, 18, 20, 22, 24] as const;
/** A smaller size is preferred where its error is within this share of the best … */
const TIE = 0.001;
/** … and it either gives up less than this share of the full map's forecast, or beats the largest by that gain. */
const LOST_SHARE = 0.002;
const CLEAR_GAIN = 0.005;

/**
 * Bytes of the tensors of a size.
 *
 * shapes  as LinearTensors
 * units   bytes
 * throws  nothing
 * source  one byte an int8, two an int16, four a row's scale
 * cost    trivial
 */
export function sizeBytes(size: Size, learned: Learned): number {
  const { channelCount, featureCount, signalCount, steps } = learned.layout;
  const { order: d, basisCount: r } = size;
  const p = channelCount * featureCount;
  return d * (p + 4) + signalCount * r * (d + 4) + steps * (2 * r + 4) + p + 4 * channelCount;
}

/**
 * Chooses the size.
 *
 * shapes  judge: moments of the calibration part, of the same bank
 * units   tensorBytes: what the tensors may take
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    a few floatFactors and errors by moments
 */
export function chooseSize(learned: Learned, judge: Moments, tensorBytes: number): Size {
  const { layout } = learned;
  const steps = trialSteps(layout.steps);
  const all = Array.from({ length: layout.featureCount }, (_, f) => f);
  const picked = pickMoments(judge, layout, all, steps);
  const trial = { ...layout, steps: steps.length };
  const energies = energiesOf(learned);
  const sizes = SHARES.flatMap((share) =>
    frontier(learned, energies, share * tensorBytes, share === 1 ? FINALISTS : 1),
  );
  if (sizes.length === 0) return { order: 1, basisCount: 1 };
  const errors = sizes.map((size) => {
    const factors = atSteps(floatFactors(learned, size.order, size.basisCount), steps);
    return mapError(picked, trial, mapOf(factors, trial)).reduce((sum, value) => sum + value, 0);
  });
  const best = Math.min(...errors);
  const finalists = errors.slice(-FINALISTS);
  const largest = errors.length - finalists.length + finalists.indexOf(Math.min(...finalists));
  const total = sumFrom(energies.directions, 0);
  const good = sizes.findIndex((size, at) => {
    if (at >= errors.length - finalists.length) return at === largest;
    const isSmallLoss = lostEnergy(energies, size) < lostEnergy(energies, sizes[largest]) + LOST_SHARE * total;
    const isBetter = errors[at] < errors[largest] * (1 - CLEAR_GAIN);
    return errors[at] <= best * (1 + TIE) && (isSmallLoss || isBetter);
  });
  return sizes[good];
}

/** Energy of the weighted forecast that each direction and each curve carries. */
interface Energies {
  readonly directions: Float64Array;
  readonly curves: Float64Array;
}

function energiesOf(learned: Learned): Energies {
  const { bottleneck, covariance, map, layout } = learned;
  const order = bottleneck.carried.length;
  const moments = stateMoments(bottleneck.directions, order, covariance, map, layout);
  const { energy } = findCurves(fullReadout(moments, order, layout), moments.covariance, order, layout);
  return { directions: bottleneck.carried.map((sd) => sd * sd), curves: energy };
}

/** The sizes within the bytes that lose least of the full map's weighted forecast, at most `count`, the best first. */
function frontier(learned: Learned, energies: Energies, bytes: number, count: number): Size[] {
  const sizes: Size[] = [];
  for (const basisCount of BASES) {
    if (basisCount > learned.layout.steps) break;
    let order = energies.directions.length;
    while (order > 0 && sizeBytes({ order, basisCount }, learned) > bytes) order--;
    if (order > 0) sizes.push({ order, basisCount });
  }
  return sizes.sort((a, b) => lostEnergy(energies, a) - lostEnergy(energies, b)).slice(0, count);
}

function lostEnergy(energies: Energies, size: Size): number {
  return sumFrom(energies.directions, size.order) + sumFrom(energies.curves, size.basisCount);
}

function sumFrom(values: Float64Array, from: number): number {
  let sum = 0;
  for (let k = from; k < values.length; k++) sum += values[k];
  return sum;
}

function atSteps(factors: Factors, steps: readonly number[]): Factors {
  const { basisCount, horizonBasis } = factors;
  const picked = new Float64Array(steps.length * basisCount);
  steps.forEach((h, at) => {
    for (let b = 0; b < basisCount; b++) picked[at * basisCount + b] = horizonBasis[(h - 1) * basisCount + b];
  });
  return { ...factors, horizonBasis: picked };
}
