/**
 * When the equipment switches, and where the driven signals land: both told by the value to which the old mode would have
 * brought them. A controller that starts a pump at a level, or a compressor at a temperature, leaves a sharp edge in that
 * value, whatever the level's noise; where in the tick the switch fell shows in how far the old mode would have gone.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Ticks seen from one mode: where it would have led, and what came. */
export interface Outcomes {
  /** (ticks × n) value under the old mode. */
  readonly along: Float64Array;
  /** (ticks) ticks spent in the mode so far. */
  readonly dwell: Float64Array;
  /** (ticks) mode that followed. */
  readonly to: Int8Array;
  readonly count: number;
}

/** Log odds of one pair's switch: constant, n weights, weight of dwell / dwellLimit. */
export type Hazard = Float64Array;

const MOST_STEPS = 60;
/** Penalty on weights of values standardised within the mode: keeps a perfectly sharp edge finite. */
const PENALTY = 0.02;
/** Gain in penalised log likelihood, per switch, for which the dwell is looked at. */
const DWELL_GAIN = 0.15;
const LARGEST_ODDS = 60;

/**
 * Log odds of switching from a mode to another, given that it has not switched elsewhere.
 *
 * shapes  result (n + 2)
 * units   standardised
 * throws  TrainError 'fit' if a step cannot be solved
 * source  penalised logistic regression by Newton's steps, halved until the likelihood rises: le Cessie & van Houwelingen,
 *         Applied Statistics 41 (1992)
 * cost    O(steps · ticks · n²)
 */
export function fitHazard(outcomes: Outcomes, n: number, to: number, dwellLimit: number): Hazard {
  const plain = newton(outcomes, n, to, dwellLimit, false);
  const timed = newton(outcomes, n, to, dwellLimit, true);
  let switches = 0;
  for (let t = 0; t < outcomes.count; t++) if (outcomes.to[t] === to) switches++;
  return timed.likelihood - plain.likelihood > Math.max(4, DWELL_GAIN * switches) ? timed.weights : plain.weights;
}

interface Fitted {
  readonly weights: Hazard;
  readonly likelihood: number;
}

function newton(outcomes: Outcomes, n: number, to: number, dwellLimit: number, useDwell: boolean): Fitted {
  const { count } = outcomes;
  const width = n + 1 + (useDwell ? 1 : 0);
  const { x, isEvent, mean, scale } = standardise(outcomes, n, to, dwellLimit, width);
  let weights = new Float64Array(width);
  let events = 0;
  for (let t = 0; t < count; t++) events += isEvent[t];
  weights[0] = Math.log((events + 0.5) / (count - events + 0.5));
  let likelihood = likelihoodOf(x, isEvent, weights, width);
  for (let step = 0; step < MOST_STEPS; step++) {
    const move = newtonStep(x, isEvent, weights, width);
    let share = 1;
    let next = weights;
    let value = Number.NEGATIVE_INFINITY;
    for (; share > 1e-4; share /= 2) {
      next = weights.map((w, k) => w + share * move[k]);
      value = likelihoodOf(x, isEvent, next, width);
      if (value >= likelihood) break;
    }
    if (!(value > likelihood)) break;
    const gain = value - likelihood;
    weights = next;
    likelihood = value;
    if (gain < 1e-4) break;
  }
  const out = new Float64Array(n + 2);
  out[0] = weights[0];
  for (let k = 1; k < width; k++) {
    out[k] = weights[k] / scale[k];
    out[0] -= (weights[k] * mean[k]) / scale[k];
  }
  return { weights: out, likelihood };
}

/** Regressors about the mean and in deviations of the ticks at which the switch came. */
function standardise(
  outcomes: Outcomes,
  n: number,
  to: number,
  dwellLimit: number,
  width: number,
): { x: Float64Array; isEvent: Uint8Array; mean: Float64Array; scale: Float64Array } {
  const { along, dwell, count } = outcomes;
  const x = new Float64Array(count * width);
  const isEvent = new Uint8Array(count);
  const mean = new Float64Array(width);
  const scale = new Float64Array(width).fill(1);
  for (let t = 0; t < count; t++) {
    isEvent[t] = outcomes.to[t] === to ? 1 : 0;
    x[t * width] = 1;
    for (let j = 0; j < n; j++) x[t * width + 1 + j] = along[t * n + j];
    if (width > n + 1) x[t * width + n + 1] = Math.min(dwell[t], dwellLimit) / dwellLimit;
  }
  for (let k = 1; k < width; k++) {
    let sum = 0;
    let events = 0;
    for (let t = 0; t < count; t++)
      if (isEvent[t] === 1) {
        sum += x[t * width + k];
        events++;
      }
    mean[k] = events > 0 ? sum / events : 0;
    let squares = 0;
    for (let t = 0; t < count; t++) squares += (x[t * width + k] - mean[k]) ** 2;
    scale[k] = Math.sqrt(squares / Math.max(1, count)) || 1;
    for (let t = 0; t < count; t++) x[t * width + k] = (x[t * width + k] - mean[k]) / scale[k];
  }
  return { x, isEvent, mean, scale };
}

function likelihoodOf(x: Float64Array, isEvent: Uint8Array, weights: Float64Array, width: number): number {
  let sum = 0;
  for (let t = 0; t < isEvent.length; t++) {
    const odds = oddsOf(x, t, weights, width);
    const signed = isEvent[t] === 1 ? odds : -odds;
    sum -= signed > 0 ? Math.log1p(Math.exp(-signed)) : -signed + Math.log1p(Math.exp(signed));
  }
  for (let k = 1; k < width; k++) sum -= (PENALTY / 2) * weights[k] * weights[k];
  return sum;
}

function oddsOf(x: Float64Array, t: number, weights: Float64Array, width: number): number {
  let odds = 0;
  for (let k = 0; k < width; k++) odds += weights[k] * x[t * width + k];
  return Math.max(-LARGEST_ODDS, Math.min(LARGEST_ODDS, odds));
}

function newtonStep(x: Float64Array, isEvent: Uint8Array, weights: Float64Array, width: number): Float64Array {
  const hessian = new Float64Array(width * width);
  const gradient = new Float64Array(width);
  for (let t = 0; t < isEvent.length; t++) {
    const p = 1 / (1 + Math.exp(-oddsOf(x, t, weights, width)));
    const curve = p * (1 - p);
    const rest = isEvent[t] - p;
    for (let a = 0; a < width; a++) {
      const value = x[t * width + a];
      gradient[a] += rest * value;
      if (curve > 1e-12) for (let b = 0; b <= a; b++) hessian[a * width + b] += curve * value * x[t * width + b];
    }
  }
  for (let a = 0; a < width; a++) {
    hessian[a * (width + 1)] += a === 0 ? 1e-6 : PENALTY;
    if (a > 0) gradient[a] -= PENALTY * weights[a];
  }
  solveCholesky(cholesky(hessian, width), width, gradient, 1);
  return gradient;
}

/** A landing is believed as if the midpoint had been seen this many times more. */
const LANDING_PRIOR = 5;

/**
 * Landing of one driven signal at a pair's switches: what is left of it over the midpoint, on the old mode's values.
 *
 * shapes  along (count × n), rest (count); result (1 + n)
 * units   standardised
 * throws  TrainError 'fit' if the solve fails
 * source  ridge about the mean of the switches
 * cost    O(count · n²)
 */
export function fitLanding(along: Float64Array, rest: Float64Array, count: number, n: number): Float64Array {
  const out = new Float64Array(1 + n);
  if (count === 0) return out;
  const mean = new Float64Array(n);
  let restMean = 0;
  for (let e = 0; e < count; e++) {
    for (let j = 0; j < n; j++) mean[j] += along[e * n + j] / count;
    restMean += rest[e] / count;
  }
  restMean *= count / (count + LANDING_PRIOR);
  const gram = new Float64Array(n * n);
  const right = new Float64Array(n);
  let trace = 0;
  for (let e = 0; e < count; e++) {
    for (let a = 0; a < n; a++) {
      const x = along[e * n + a] - mean[a];
      right[a] += x * (rest[e] - restMean);
      trace += x * x;
      for (let b = 0; b < n; b++) gram[a * n + b] += x * (along[e * n + b] - mean[b]);
    }
  }
  for (let a = 0; a < n; a++) gram[a * (n + 1)] += (LANDING_PRIOR * trace) / (n * count) || 1;
  solveCholesky(cholesky(gram, n), n, right, 1);
  out[0] = restMean;
  for (let a = 0; a < n; a++) {
    out[1 + a] = right[a];
    out[0] -= right[a] * mean[a];
  }
  return out;
}
