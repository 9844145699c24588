/**
 * How large the state and how many curves: as large as the byte limit allows, unless a smaller one does as well on the
 * calibration part. What shrinking costs is known from the covariance of the state alone; only a few sizes on the frontier
 * are judged on readings the map was not learned from.
 */

import { type Factors, type Learned, mapOf, roundedFactors, type Size } from '../quantise/quantise.ts';
import { pickMoments } from './moment-sets.ts';
import type { Moments } from './moments.ts';
import { mapError } from './ridge.ts';
import { trialSteps } from './step-groups.ts';

/** Shares of the byte limit tried, from small to the whole. */
const SHARES = [0.15, 0.3, 0.5, 0.75, 1] as const;
/** Sizes that fill the bytes and are judged on unseen readings; one alone at smaller shares. */
const FINALISTS = 5;
/** Bases tried; a basis of more curves than steps has no use. */
const BASES = [1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15, 16, 18, 20, 22, 24] as const;
/**
 * Of the sizes that fill the bytes the one nearest to the full map is taken: the map was chosen on more folds than size can
 * be. A smaller one is preferred where its error on the calibration part is no worse by this share …
 */
const TIE = 0.001;
/** … and it gives up no more than this share of the full map's forecast, or where it beats the nearest by that gain. */
const LOST_SHARE = 0.001;
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
  const { order: d, basisCount: r, hasOwn } = size;
  const p = channelCount * featureCount;
  const own = hasOwn ? signalCount * r * ((1 + channelCount - signalCount) * featureCount + 4) : 0;
  return d * (p + 4) + signalCount * r * (d + 4) + own + steps * (2 * r + 4) + p + 4 * channelCount;
}

/**
 * Chooses the size.
 *
 * shapes  judge: moments of the calibration part, of the same bank
 * units   tensorBytes: what the tensors may take
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    a few roundedFactors and errors by moments
 */
export function chooseSize(learned: Learned, judge: Moments, tensorBytes: number): Size {
  const { layout } = learned;
  const { steps } = trialSteps(layout.steps);
  const all = Array.from({ length: layout.featureCount }, (_, f) => f);
  const picked = pickMoments(judge, layout, all, steps);
  const trial = { ...layout, steps: steps.length };
  const families = [false, true].map((hasOwn) => energiesOf(learned, hasOwn));
  const sizes = families.flatMap((energies) =>
    SHARES.flatMap((share) => frontier(learned, energies, share, tensorBytes)),
  );
  if (sizes.length === 0) return { order: 1, basisCount: 1, hasOwn: false };
  const judged = sizes.map((one): Judged => {
    const factors = atSteps(roundedFactors(learned, one.size).factors, steps);
    const error = mapError(picked, trial, mapOf(factors, trial)).reduce((sum, value) => sum + value, 0);
    return { ...one, error, bytes: sizeBytes(one.size, learned) };
  });
  const full = judged.filter(({ isFull }) => isFull);
  const nearest = least(full.length > 0 ? full : judged, ({ lost }) => lost);
  const leastError = least(judged, ({ error }) => error).error;
  const total = sumFrom(energiesOf(learned, false).directions, 0);
  const smaller = judged.filter(({ error, lost, bytes }) => {
    const isAlike = lost < nearest.lost + LOST_SHARE * total && error <= nearest.error * (1 + TIE);
    const isBetter = error < nearest.error * (1 - CLEAR_GAIN) && error <= leastError * (1 + TIE);
    return bytes < nearest.bytes && (isAlike || isBetter);
  });
  return smaller.reduce((best, one) => (one.bytes < best.bytes ? one : best), nearest).size;
}

/** A size on the frontier. */
interface Sized {
  readonly size: Size;
  /** Of the weighted forecast's energy. */
  readonly lost: number;
  /** Whether it fills the bytes. */
  readonly isFull: boolean;
}

interface Judged extends Sized {
  readonly error: number;
  readonly bytes: number;
}

function least(sizes: readonly Judged[], measure: (size: Judged) => number): Judged {
  return sizes.reduce((best, one) => (measure(one) < measure(best) ? one : best));
}

/** Energy of the weighted forecast that each direction and each curve carries, without or with an own part. */
interface Energies {
  readonly hasOwn: boolean;
  readonly directions: Float64Array;
  readonly curves: Float64Array;
}

function energiesOf(learned: Learned, hasOwn: boolean): Energies {
  const { bottleneck, apart, curves } = learned;
  // Where signals say nothing of each other the own part gives all, and one state is kept to show what moves most.
  const carried = hasOwn ? (apart.isJoint ? apart.bottleneck.carried : Float64Array.of(0)) : bottleneck.carried;
  return { hasOwn, directions: carried.map((sd) => sd * sd), curves: curves.energy };
}

/** The sizes within a share of the bytes that lose least of the full map's weighted forecast, the best first. */
function frontier(learned: Learned, energies: Energies, share: number, tensorBytes: number): Sized[] {
  const sizes: Sized[] = [];
  const { hasOwn, directions, curves } = energies;
  for (const basisCount of BASES) {
    if (basisCount > learned.layout.steps) break;
    let order = directions.length;
    while (order > 0 && sizeBytes({ order, basisCount, hasOwn }, learned) > share * tensorBytes) order--;
    const lost = sumFrom(directions, order) + sumFrom(curves, basisCount);
    if (order > 0) sizes.push({ size: { order, basisCount, hasOwn }, lost, isFull: share === 1 });
  }
  return sizes.sort((a, b) => a.lost - b.lost).slice(0, share === 1 ? FINALISTS : 1);
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
