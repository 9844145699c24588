/**
 * The strongest rival: a ridge regression straight from a signal's own last readings to each future step, its penalty
 * chosen on the last quarter of the learning part. Much larger than our model where the window is long, and blind to
 * other signals; it is there so that skill is not shown against straw men alone.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';

/** y(t+h) = y(t) + Σ_k (y(t-k) - y(t)) weights[k-1, h-1]. */
export interface WindowRidge {
  readonly lags: number;
  /** (lags × horizon) */
  readonly weights: Float64Array;
}

const LEAST_LAGS = 96;
const MOST_LAGS = 288;
const PENALTIES = [1e-4, 1e-3, 1e-2, 1e-1, 1] as const;

/**
 * Fits the map.
 *
 * shapes  y (n) complete
 * units   the signal's
 * throws  nothing; null where the part is too short for three times the window and the horizon
 * source  Hoerl & Kennard, Technometrics 12 (1970); direct multi-step: Chevillon, Journal of Economic Surveys 21 (2007)
 * cost    O(n (lags + horizon) + (lags + horizon)² + lags³)
 */
export function fitWindowRidge(y: Float64Array, horizon: number, periodTicks: number): WindowRidge | null {
  const wanted = 2 * periodTicks > MOST_LAGS ? LEAST_LAGS : Math.max(LEAST_LAGS, 2 * periodTicks);
  const lags = Math.min(wanted, Math.floor(y.length / 8));
  const edge = lags + Math.floor(0.75 * (y.length - lags));
  if (lags < 1 || edge - horizon <= 3 * lags || y.length - horizon <= edge) return null;
  const early = windowMoments(y, lags, horizon, lags, edge - horizon);
  const late = windowMoments(y, lags, horizon, edge, y.length - horizon);
  let best = Number.POSITIVE_INFINITY;
  let chosen: number = PENALTIES[0];
  for (const penalty of PENALTIES) {
    const error = lateError(late, solve(early, lags, horizon, penalty), lags, horizon);
    if (error >= best) continue;
    best = error;
    chosen = penalty;
  }
  const both = {
    gram: early.gram.map((value, k) => value + late.gram[k]),
    cross: early.cross.map((value, k) => value + late.cross[k]),
  };
  return { lags, weights: solve(both, lags, horizon, chosen) };
}

/**
 * Forecasts from an origin; what lies before the series counts as its first reading.
 *
 * shapes  y (ticks) complete; out (horizon)
 * units   the signal's
 * throws  nothing
 * source  as the map
 * cost    O(lags horizon); four lags at a time, added one after another
 */
export function forecastWindow(
  { lags, weights }: WindowRidge,
  horizon: number,
  y: Float64Array,
  at: number,
  out: Float64Array,
): void {
  const now = y[at];
  out.fill(now);
  let k = 1;
  for (; k + 3 <= lags; k += 4) {
    const f0 = y[Math.max(0, at - k)] - now;
    const f1 = y[Math.max(0, at - k - 1)] - now;
    const f2 = y[Math.max(0, at - k - 2)] - now;
    const f3 = y[Math.max(0, at - k - 3)] - now;
    const r0 = (k - 1) * horizon;
    const r1 = r0 + horizon;
    const r2 = r1 + horizon;
    const r3 = r2 + horizon;
    for (let h = 0; h < horizon; h++) {
      out[h] = out[h] + f0 * weights[r0 + h] + f1 * weights[r1 + h] + f2 * weights[r2 + h] + f3 * weights[r3 + h];
    }
  }
  for (; k <= lags; k++) {
    const far = y[Math.max(0, at - k)] - now;
    for (let h = 0; h < horizon; h++) out[h] += far * weights[(k - 1) * horizon + h];
  }
}

interface WindowMoments {
  /** (lags × lags) */
  readonly gram: Float64Array;
  /** (lags × horizon) */
  readonly cross: Float64Array;
}

/** Sums over origins from..to-1 of the window's differences from the origin, with themselves and with the future's. */
function windowMoments(y: Float64Array, lags: number, horizon: number, from: number, to: number): WindowMoments {
  const size = lags + horizon + 1;
  const raw = new Float64Array(size * size);
  // Row u stands for y(t + horizon - u): 0 the furthest future, `horizon` the origin. Moving both places one tick back
  // changes the sum by its two ends alone.
  const lagged = laggedProducts(y, from + horizon, to + horizon, size);
  for (let v = 0; v < size; v++) {
    raw[v] = lagged[v];
    raw[v * size] = lagged[v];
  }
  for (let u = 1; u < size; u++) {
    for (let v = u; v < size; v++) {
      const first = y[from + horizon - u] * y[from + horizon - v];
      const last = y[to + horizon - u] * y[to + horizon - v];
      raw[u * size + v] = raw[(u - 1) * size + v - 1] + first - last;
      raw[v * size + u] = raw[u * size + v];
    }
  }
  const at = (u: number, v: number): number =>
    raw[u * size + v] - raw[u * size + horizon] - raw[horizon * size + v] + raw[horizon * size + horizon];
  const gram = new Float64Array(lags * lags);
  const cross = new Float64Array(lags * horizon);
  for (let a = 0; a < lags; a++) {
    for (let b = 0; b < lags; b++) gram[a * lags + b] = at(horizon + 1 + a, horizon + 1 + b);
    for (let h = 1; h <= horizon; h++) cross[a * horizon + h - 1] = at(horizon + 1 + a, horizon - h);
  }
  return { gram, cross };
}

/** (count) Σ y(t) y(t - v) over from <= t < to for v = 0 … count - 1, four distances at a time, each sum in order of t. */
function laggedProducts(y: Float64Array, from: number, to: number, count: number): Float64Array {
  const out = new Float64Array(count);
  let v = 0;
  for (; v + 3 < count; v += 4) {
    let s0 = 0;
    let s1 = 0;
    let s2 = 0;
    let s3 = 0;
    for (let t = from; t < to; t++) {
      const now = y[t];
      s0 += now * y[t - v];
      s1 += now * y[t - v - 1];
      s2 += now * y[t - v - 2];
      s3 += now * y[t - v - 3];
    }
    out[v] = s0;
    out[v + 1] = s1;
    out[v + 2] = s2;
    out[v + 3] = s3;
  }
  for (; v < count; v++) for (let t = from; t < to; t++) out[v] += y[t] * y[t - v];
  return out;
}

function solve(moments: WindowMoments, lags: number, horizon: number, penalty: number): Float64Array {
  const gram = moments.gram.slice();
  let largest = 0;
  for (let k = 0; k < lags; k++) largest = Math.max(largest, gram[k * lags + k]);
  for (let k = 0; k < lags; k++) {
    gram[k * lags + k] += Math.max(penalty * gram[k * lags + k], 1e-9 * largest, Number.MIN_VALUE * 1e20);
  }
  const weights = moments.cross.slice();
  solveCholesky(cholesky(gram, lags), lags, weights, horizon);
  return weights;
}

/** Squared error over all steps, without the part that no map changes. */
function lateError(late: WindowMoments, weights: Float64Array, lags: number, horizon: number): number {
  const pushed = multiply(late.gram, weights, lags, lags, horizon);
  let sum = 0;
  for (let at = 0; at < pushed.length; at++) sum += weights[at] * (pushed[at] - 2 * late.cross[at]);
  return sum;
}
