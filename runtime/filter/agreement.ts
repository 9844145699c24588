/**
 * Sensors that drift: a signal that the others always told, and that slowly leaves what they say, is told of. Each tick the
 * difference between a reading and what the others' readings make of it adds to a two-sided cumulative sum, which forgets
 * what a sound sensor scatters and grows where differences keep one sign. Nothing is done about it, since which of the
 * two drifts, or whether the plant has changed, no sum can say.
 */
import type { CommonModel } from './model.ts';
import { requireEach, requireField, requireLength, requireWeights } from './requirement.ts';
import type { FilterState } from './state.ts';

/** As it stands in a model. */
export interface Agreement {
  /** (ny × nc) what the other channels say of a signal: Σ weight × z + offset; nothing of itself. */
  readonly weights: Float64Array;
  /** (ny) */
  readonly offset: Float64Array;
  /** (ny) standard deviation of the difference. */
  readonly scale: Float64Array;
  /** (ny) of the sum, above which a signal is told of; 0: not watched. */
  readonly limit: Float64Array;
}

/** What a sum forgets at every tick, in standard deviations: half of the smallest shift that it is to find quickly. */
export const ALLOWANCE = 0.5;
/** One difference counts for so many standard deviations at most: a spike is no drift. */
export const MOST_DIFFERENCE = 4;
/** Sums grow to so many limits at most, so that agreement found again is seen. */
const MOST_LIMITS = 2;

/**
 * Refuses what cannot be computed with.
 *
 * throws  FilterError 'model'
 */
export function checkAgreement(model: CommonModel, { weights, offset, scale, limit }: Agreement): void {
  const { signalCount: ny, channelCount: nc } = model;
  requireLength(weights, 'agreement.weights', ny * nc);
  requireWeights(weights, 'agreement.weights');
  for (const [name, values] of Object.entries({ offset, scale, limit })) {
    requireLength(values, `agreement.${name}`, ny);
    requireWeights(values, `agreement.${name}`);
  }
  requireEach(limit, 'agreement.limit', (value) => value >= 0, '0 or more');
  for (let i = 0; i < ny; i++) {
    requireField(scale[i] > 0 || limit[i] === 0, `agreement.scale[${i}]`, 'above 0 where there is a limit', scale[i]);
    requireField(
      weights[i * nc + i] === 0,
      `agreement.weights[${i * nc + i}]`,
      '0: nothing of itself',
      weights[i * nc + i],
    );
  }
}

/**
 * Adds the differences of a tick whose readings are all folded in.
 *
 * shapes  state.disagreement (2·ny): sums of differences above, then of those below
 * units   standard deviations of the difference
 * source  Page, Biometrika 41 (1954), two-sided with the allowance of Montgomery, Statistical Quality Control, section 9.1
 * cost    O(ny · nc); allocates nothing
 */
export function watchAgreement(model: CommonModel, agreement: Agreement, state: FilterState): void {
  const { signalCount: ny, channelCount: nc } = model;
  const { weights, offset, scale, limit } = agreement;
  const sums = state.disagreement;
  for (let i = 0; i < ny; i++) {
    if (limit[i] === 0 || state.age[i] > 0) continue;
    let difference = state.value[i] - offset[i];
    let isWhole = true;
    for (let c = 0; c < nc; c++) {
      const weight = weights[i * nc + c];
      if (weight === 0) continue;
      if (state.age[c] > 0) isWhole = false;
      difference -= weight * state.value[c];
    }
    if (!isWhole) continue;
    const share = Math.min(MOST_DIFFERENCE, Math.max(-MOST_DIFFERENCE, difference / scale[i]));
    const most = MOST_LIMITS * limit[i];
    sums[i] = Math.min(most, Math.max(0, sums[i] + share - ALLOWANCE));
    sums[ny + i] = Math.min(most, Math.max(0, sums[ny + i] - share - ALLOWANCE));
  }
}

/**
 * The channel that a signal disagrees with most, or −1 where it agrees with what the others say.
 *
 * shapes  signal below ny
 * cost    O(nc); allocates nothing
 */
export function disagreesWith(
  { agreement, signalCount, channelCount }: CommonModel,
  state: FilterState,
  signal: number,
): number {
  if (agreement === undefined || agreement.limit[signal] === 0) return -1;
  const limit = agreement.limit[signal];
  if (state.disagreement[signal] <= limit && state.disagreement[signalCount + signal] <= limit) return -1;
  let most = -1;
  for (let c = 0; c < channelCount; c++) {
    const size = Math.abs(agreement.weights[signal * channelCount + c]);
    if (c !== signal && (most < 0 || size > Math.abs(agreement.weights[signal * channelCount + most]))) most = c;
  }
  return most;
}
