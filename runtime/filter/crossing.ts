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
 * Real errors are no such chain. Where the bundle says how often limits were crossed when this or that probability was said,
 * on history the model did not learn from, what is said is put right by it (`crossingMap`).
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import { type Bounds, radiiOf } from './interval.ts';
import type { CommonModel } from './model.ts';
import { normalCdf, normalDensity } from './normal-table.ts';
import type { FilterState } from './state.ts';

/** What is said about one limit of one signal. */
export interface Crossing {
  /** Probability that the limit is crossed at some step 1 … H. */
  readonly probability: number;
  /** First step by which it has more likely than not been crossed; null when there is none within the horizon. */
  readonly step: number | null;
}

/** Chance of staying below under which nothing more can be learned; keeps the division by it tame. */
const LEAST_CHANCE = 1e-9;

/**
 * Probability of crossing a limit, from the path and the bounds as they stand.
 *
 * shapes  median (ny × H), as forecastPath wrote it for this state
 * units   median and limit in the signal's unit
 * source  truncated normal moments: Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, 13.10
 * cost    O(H); allocates only its answer
 */
export function crossing(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  median: Float64Array,
  signal: number,
  limit: number,
  side: 'above' | 'below',
): Crossing {
  const H = model.horizon;
  const sign = side === 'above' ? 1 : -1;
  const perRadius = 1 / bounds.quantile;
  radiiOf(model, bounds, state, signal, bounds.scratch, 0);
  const fresh = (model.crossingFresh ?? 1) * bounds.radius[signal * H] * perRadius;
  let stayed = 1;
  let largest = 0;
  let mean = 0;
  let variance = 0;
  let before = 1;
  let step: number | null = null;
  for (let h = 1; h <= H; h++) {
    const sd = bounds.scratch[h - 1] * perRadius;
    const room = (sign * (limit - median[signal * H + h - 1])) / model.scale[signal];
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
    if (step === null && observedShare(model, Math.max(1 - stayed, largest)) > 0.5) step = h;
  }
  return { probability: observedShare(model, Math.max(1 - stayed, largest)), step };
}

/** What a said probability has come to; straight lines between the knots. */
function observedShare(model: CommonModel, said: number): number {
  const p = Math.min(1, Math.max(0, said));
  const map = model.crossingMap;
  if (map === undefined) return p;
  let k = 1;
  while (p > CROSSING_KNOTS[k]) k++;
  const share = (p - CROSSING_KNOTS[k - 1]) / (CROSSING_KNOTS[k] - CROSSING_KNOTS[k - 1]);
  return map[k - 1] + share * (map[k] - map[k - 1]);
}
