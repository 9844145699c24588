/**
 * How probable it is that a signal crosses a limit within the horizon, and by which step it is more likely than not.
 * Advice for people, never for an interlock: the forecast errors are taken as normal, with the bounds' half-width as that
 * many standard deviations, and as a chain e(h) = φ e(h−1) + w, with the sd of w that of the one-step error σ₁, as in a
 * random walk or an autoregression, times `crossingFresh`: part of a one-step error is noise of the reading, which does not
 * come anew at every step. Variances σ_h² then fix φ_h = √(1 − σ_w²/σ_h²) σ_h / σ_{h−1}.
 *
 * The chance of having stayed below is multiplied up step by step; after each step the error, given that it stayed below,
 * is put back to a normal one by its mean and variance (moments of the truncated normal distribution). Simulation of
 * such chains over 60 steps differs by at most 0.06 (tested); the largest chance of any single step, which is the naive
 * answer, is short by a factor of two and more.
 *
 * Where a kind draws paths, as of a plant that fills and is pumped down, it is the time of the turn that is not known, and
 * the path forecast, a mean of paths out of phase, goes nowhere near the turn. Each drawn path then has a chain of its own,
 * with what the paths' spread leaves of the variance, and the chances are averaged.
 *
 * Real errors are no such chain. Where the bundle says how often limits were crossed when this or that probability was said,
 * on history the model did not learn from, what is said is put right by it (`crossingMaps`, `crossingMap`); each step keeps
 * its share of the whole chance.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import { type Bounds, radiiOf } from './interval.ts';
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { normalCdf, normalDensity } from './normal-table.ts';
import type { FilterState } from './state.ts';

/** What is said about one limit of one signal. */
export interface Crossing {
  /** Probability that the limit is crossed at some step 1 … H. */
  readonly probability: number;
  /** First step by which it has more likely than not been crossed; null when there is none within the horizon. */
  readonly step: number | null;
  /** Where it is crossed within the horizon, the step by which it is as probably as not; null: nothing is said to cross. */
  readonly likely: number | null;
  /**
   * And the steps before and after which the bounds' tails lie, 5 % each at a coverage of 90 %. Null where likely is, and where
   * the chances come of drawn paths: few as they are, they do not tell of tails (measured on wet wells: two in five crossings came
   * before their 5 %).
   */
  readonly earliest: number | null;
  readonly latest: number | null;
}

/** Chance of staying below under which nothing more can be learned; keeps the division by it tame. */
const LEAST_CHANCE = 1e-9;
const NOWHERE = new Float64Array(0);

/**
 * Probability of crossing a limit, from the path and the bounds as they stand.
 *
 * shapes  median (ny × H), as forecastPath wrote it last for this state
 * units   median and limit in the signal's unit
 * source  truncated normal moments: Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, 13.10
 * cost    O(H) for each drawn path; allocates only its answer
 */
export function crossing(
  model: Model,
  bounds: Bounds,
  state: FilterState,
  median: Float64Array,
  signal: number,
  limit: number,
  side: 'above' | 'below',
): Crossing {
  const H = model.horizon;
  const { scratch, crossed } = bounds;
  const perRadius = 1 / bounds.quantile;
  radiiOf(model, bounds, state, signal, scratch, 0);
  for (let h = 0; h < H; h++) scratch[h] *= perRadius;
  const oneStep = bounds.radius[signal * H] * perRadius;
  const fresh = (model.crossingFresh ?? 1) * oneStep;
  crossed.fill(0);
  const { draws } = kernelOf(model);
  const place = draws === undefined ? -1 : draws.place(model, signal);
  if (draws === undefined || place < 0) {
    addChain(model, bounds, median, NOWHERE, -1, 1, fresh, signal, limit, side);
  } else {
    const away = draws.away(state.core);
    leaveOwn(scratch, oneStep, away, place * draws.count, draws.count);
    for (let p = 0; p < draws.count; p++) {
      const row = (place * draws.count + p) * H;
      addChain(model, bounds, median, away, row, 1 / draws.count, fresh, signal, limit, side);
    }
  }
  const tail = place < 0 ? (1 - model.coverage) / 2 : null;
  return answerOf(crossed, observedShare(model, signal, limit, crossed[H - 1]), tail);
}

/** Puts together what is said, from the chances of having crossed by each step; `tail` null: nothing is said of tails. */
function answerOf(crossed: Float64Array, probability: number, tail: number | null): Crossing {
  return {
    probability,
    // The map was learned of the whole horizon: it says nothing of when, so that each step keeps its share of the chance.
    step: stepOf(crossed, probability, 0.5),
    likely: stepOf(crossed, 1, 0.5),
    earliest: tail === null ? null : stepOf(crossed, 1, tail),
    latest: tail === null ? null : stepOf(crossed, 1, 1 - tail),
  };
}

/** First step by which `whole` times its share of all that ever crosses is above `part`; null: none. */
function stepOf(crossed: Float64Array, whole: number, part: number): number | null {
  const H = crossed.length;
  for (let h = 0; h < H; h++) if (crossed[h] * whole > part * crossed[H - 1]) return h + 1;
  return null;
}

/** Takes the variance between the drawn paths out of each step's; a one-step error's is left, where there is as much. */
function leaveOwn(sds: Float64Array, oneStep: number, away: Float64Array, firstRow: number, count: number): void {
  const H = sds.length;
  for (let h = 0; h < H; h++) {
    let between = 0;
    for (let p = firstRow; p < firstRow + count; p++) between += away[p * H + h] * away[p * H + h];
    const own = Math.sqrt(Math.max(0, sds[h] * sds[h] - between / count));
    sds[h] = Math.max(own, Math.min(oneStep, sds[h]));
  }
}

/** Adds `weight` times the chance of having crossed by each step to bounds.crossed, for the path at `row` of `away`. */
function addChain(
  model: CommonModel,
  { scratch, crossed }: Bounds,
  median: Float64Array,
  away: Float64Array,
  row: number,
  weight: number,
  fresh: number,
  signal: number,
  limit: number,
  side: 'above' | 'below',
): void {
  const H = model.horizon;
  const sign = side === 'above' ? 1 : -1;
  let stayed = 1;
  let largest = 0;
  let mean = 0;
  let variance = 0;
  let before = 1;
  for (let h = 1; h <= H; h++) {
    const sd = scratch[h - 1];
    const off = (limit - median[signal * H + h - 1]) / model.scale[signal];
    const room = sign * (row < 0 ? off : off - away[row + h - 1]);
    const kept = h === 1 ? 0 : Math.max(0, 1 - (fresh * fresh) / (sd * sd));
    const carried = (Math.sqrt(kept) * sd) / before;
    mean *= carried;
    variance = carried * carried * variance + sd * sd * (1 - kept);
    const spread = Math.sqrt(variance);
    // Beyond 40 both table ends are long past, and a product with an infinity is kept away.
    const a = Math.min(40, Math.max(-40, (room - mean) / spread));
    const chance = Math.max(LEAST_CHANCE, normalCdf(a));
    const pull = normalDensity(a) / chance;
    mean -= spread * pull;
    // Truncation never widens; never quite zero, so that the next division stands.
    variance *= Math.min(1, Math.max(1e-6, 1 - a * pull - pull * pull));
    stayed *= chance;
    largest = Math.max(largest, 1 - normalCdf(room / sd));
    before = sd;
    crossed[h - 1] += weight * Math.max(1 - stayed, largest);
  }
}

/** What a said probability has come to; a signal's own map for the limits it was learned from, fading beyond. */
function observedShare(model: CommonModel, signal: number, limit: number, said: number): number {
  const p = Math.min(1, Math.max(0, said));
  const common = model.crossingMap === undefined ? p : mapped(model.crossingMap, p);
  const own = model.crossingMaps?.[signal] ?? null;
  if (own === null) return common;
  const z = (limit - model.mean[signal]) / model.scale[signal];
  const weight = Math.max(0, 1 - Math.max(0, own.low - z, z - own.high));
  return common + weight * (mapped(own.map, p) - common);
}

/** Straight lines between the knots. */
function mapped(map: Float64Array, p: number): number {
  let k = 1;
  while (p > CROSSING_KNOTS[k]) k++;
  const share = (p - CROSSING_KNOTS[k - 1]) / (CROSSING_KNOTS[k] - CROSSING_KNOTS[k - 1]);
  return map[k - 1] + share * (map[k] - map[k - 1]);
}
