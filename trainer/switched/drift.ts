/**
 * How each mode moves the driven signals: drift and coupling by generalised least squares. What disturbs a plant (inflow,
 * doors, weather) is persistent, and so mixed up with the modes it brings about; plain least squares would take a strong
 * inflow for a weak pump. So the disturbance's own prediction from its past is taken out of both sides, and the two are
 * worked out in turn.
 */
import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { Stops } from './stops.ts';

/** What the steps of the fit look at: the history of the driven signals and the modes. */
export interface DrivenHistory {
  /** (n) of (T), standardised, and whether each was read. */
  readonly values: readonly Float64Array[];
  readonly isRead: readonly Uint8Array[];
  /** (n) where the plant itself holds them. */
  readonly stops: readonly Stops[];
  /** (T), −1 where unknown. */
  readonly mode: Int8Array;
  readonly modeCount: number;
  /** Ticks learned from. */
  readonly ticks: number;
}

/** Drift and coupling as SwitchedSection has them. */
export interface Drift {
  /** (M × n) */
  readonly drift: Float64Array;
  /** (M × n × n) */
  readonly coupling: Float64Array;
}

/** Decays of the prediction of a disturbance from its past, ticks. */
const WHITENING_TICKS = [1, 2.5, 6, 15, 40, 120];
const ROUNDS = 4;
/** A mode's own drift is believed as if the common one had been seen to begin this many times more. */
const PRIOR_VISITS = 1;
/** The same for each coupling about zero. */
const COUPLING_PRIOR_VISITS = 10;
/** Steps far beyond the usual one are left out. */
const FAR_SD = 8;

/**
 * Whether a tick's change belongs to one mode throughout, both its ends were read, and neither stands at a stop.
 *
 * shapes  t from 1
 * units   none
 * throws  nothing
 * source  none
 * cost    O(1)
 */
export function isSteady(history: DrivenHistory, i: number, t: number): boolean {
  const { mode, isRead, values } = history;
  if (mode[t] < 0 || mode[t] !== mode[t - 1] || isRead[i][t] !== 1 || isRead[i][t - 1] !== 1) return false;
  return !isHeld(history.stops[i], values[i][t]) && !isHeld(history.stops[i], values[i][t - 1]);
}

function isHeld({ floor, ceiling, band }: Stops, value: number): boolean {
  return value <= floor + band || value >= ceiling - band;
}

/**
 * Fits drift and coupling.
 *
 * shapes  as SwitchedSection
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  Cochrane & Orcutt, JASA 44 (1949), with exponential means as the disturbance's predictors
 * cost    O(rounds · T · (M n)²)
 */
export function fitDrift(history: DrivenHistory): Drift {
  const n = history.values.length;
  const M = history.modeCount;
  const drift = new Float64Array(M * n);
  const coupling = new Float64Array(M * n * n);
  for (let i = 0; i < n; i++) {
    const beta = fitSignal(history, i);
    for (let m = 0; m < M; m++) {
      drift[m * n + i] = beta[m * (n + 1)];
      for (let j = 0; j < n; j++) coupling[(m * n + i) * n + j] = beta[m * (n + 1) + 1 + j];
    }
  }
  for (let m = 0; m < M; m++) calm(coupling.subarray(m * n * n, (m + 1) * n * n), n);
  return { drift, coupling };
}

/** Weights (M × (1 + n)) of one signal's change on mode and driven values. */
function fitSignal(history: DrivenHistory, i: number): Float64Array {
  let whitening: Float64Array = new Float64Array(WHITENING_TICKS.length);
  let beta: Float64Array = new Float64Array(0);
  for (let round = 0; round < ROUNDS; round++) {
    beta = regress(history, i, whitening);
    if (round + 1 < ROUNDS) whitening = whiten(history, i, beta);
  }
  return beta;
}

/**
 * Least squares of the change on the regressors, both less their own means weighted by `whitening`. Ticks of a switch and
 * of a gap are passed over: the means keep what they held.
 */
function regress(history: DrivenHistory, i: number, whitening: Float64Array): Float64Array {
  const { values, mode, modeCount: M, ticks } = history;
  const n = values.length;
  const width = M * (n + 1);
  const K = WHITENING_TICKS.length;
  const decays = WHITENING_TICKS.map((tau) => Math.exp(-1 / tau));
  const isWhite = whitening.some((w) => w !== 0);
  const gram = new Float64Array(width * width);
  const right = new Float64Array(width);
  const means = new Float64Array((width + 1) * K);
  const row = new Float64Array(width + 1);
  const raw = new Float64Array(width + 1);
  const limit = FAR_SD * usualStep(history, i);
  for (let t = 1; t < ticks; t++) {
    if (!isSteady(history, i, t)) continue;
    const change = values[i][t] - values[i][t - 1];
    if (Math.abs(change) > limit) continue;
    raw.fill(0);
    const at = mode[t] * (n + 1);
    raw[at] = 1;
    for (let j = 0; j < n; j++) raw[at + 1 + j] = values[j][t - 1];
    raw[width] = change;
    if (isWhite) {
      for (let c = 0; c <= width; c++) {
        let rest = raw[c];
        for (let k = 0; k < K; k++) {
          const m = c * K + k;
          rest -= whitening[k] * means[m];
          means[m] = decays[k] * means[m] + (1 - decays[k]) * raw[c];
        }
        row[c] = rest;
      }
    } else row.set(raw);
    for (let a = 0; a < width; a++) {
      if (row[a] === 0) continue;
      for (let b = 0; b <= a; b++) gram[a * width + b] += row[a] * row[b];
      right[a] += row[a] * row[width];
    }
  }
  return solveWithPrior(gram, right, M, n);
}

/** Solves with each mode's drift drawn to the common one and couplings to zero, by a few pseudo-visits. */
function solveWithPrior(gram: Float64Array, right: Float64Array, M: number, n: number): Float64Array {
  const width = M * (n + 1);
  let unit = 0;
  let force = 0;
  for (let m = 0; m < M; m++) {
    unit += gram[m * (n + 1) * (width + 1)];
    force += right[m * (n + 1)];
  }
  const common = unit > 0 ? force / unit : 0;
  // After whitening a steady mode weighs little: most of what is known of its drift comes from where it begins.
  for (let m = 0; m < M; m++) {
    const at = m * (n + 1);
    gram[at * (width + 1)] += PRIOR_VISITS;
    right[at] += PRIOR_VISITS * common;
    for (let j = 1; j <= n; j++) gram[(at + j) * (width + 1)] += COUPLING_PRIOR_VISITS;
  }
  const beta = right.slice();
  solveCholesky(cholesky(gram, width), width, beta, 1);
  return beta;
}

/** Ridge of the disturbance on its own means. */
function whiten(history: DrivenHistory, i: number, beta: Float64Array): Float64Array {
  const { values, mode, ticks } = history;
  const n = values.length;
  const K = WHITENING_TICKS.length;
  const decays = WHITENING_TICKS.map((tau) => Math.exp(-1 / tau));
  const gram = new Float64Array(K * K);
  const right = new Float64Array(K);
  const means = new Float64Array(K);
  const limit = FAR_SD * usualStep(history, i);
  for (let t = 1; t < ticks; t++) {
    if (!isSteady(history, i, t)) continue;
    const change = values[i][t] - values[i][t - 1];
    if (Math.abs(change) > limit) continue;
    const at = mode[t] * (n + 1);
    let w = change - beta[at];
    for (let j = 0; j < n; j++) w -= beta[at + 1 + j] * values[j][t - 1];
    for (let a = 0; a < K; a++) {
      right[a] += means[a] * w;
      for (let b = 0; b <= a; b++) gram[a * K + b] += means[a] * means[b];
    }
    for (let k = 0; k < K; k++) means[k] = decays[k] * means[k] + (1 - decays[k]) * w;
  }
  let trace = 0;
  for (let k = 0; k < K; k++) trace += gram[k * (K + 1)];
  for (let k = 0; k < K; k++) gram[k * (K + 1)] += (1e-6 * trace) / K || 1;
  const out = right.slice();
  solveCholesky(cholesky(gram, K), K, out, 1);
  return out;
}

/** Root mean square change over steady ticks. */
function usualStep(history: DrivenHistory, i: number): number {
  let sum = 0;
  let count = 0;
  const z = history.values[i];
  for (let t = 1; t < history.ticks; t++) {
    if (!isSteady(history, i, t)) continue;
    sum += (z[t] - z[t - 1]) ** 2;
    count++;
  }
  return Math.sqrt(sum / Math.max(1, count));
}

/**
 * Draws a mode's coupling towards zero until identity plus coupling grows nowhere: spectral radius at most one.
 *
 * shapes  coupling (n × n), in place
 * units   standardised
 * throws  nothing
 * source  none
 * cost    O(n³) a halving
 */
export function calm(coupling: Float64Array, n: number): void {
  if (radius(coupling, n) <= 1) return;
  // Rates of growth of single signals first: one that feeds on itself is held at standing still.
  for (let i = 0; i < n; i++) if (coupling[i * n + i] > 0) coupling[i * n + i] = 0;
  let low = 0;
  let high = 1;
  const kept = coupling.slice();
  const at = (share: number): void => {
    for (let k = 0; k < n * n; k++) coupling[k] = Math.floor(k / n) === k % n ? kept[k] : share * kept[k];
  };
  if (radius(coupling, n) <= 1) return;
  for (let round = 0; round < 30; round++) {
    const middle = (low + high) / 2;
    at(middle);
    if (radius(coupling, n) <= 1) low = middle;
    else high = middle;
  }
  at(low);
}

/** Spectral radius of identity plus coupling. */
export function radius(coupling: Float64Array, n: number): number {
  const rows = Array.from({ length: n }, (_, i) =>
    Array.from({ length: n }, (_, j) => coupling[i * n + j] + (i === j ? 1 : 0)),
  );
  const { realEigenvalues, imaginaryEigenvalues } = new EigenvalueDecomposition(new Matrix(rows));
  return Math.max(...realEigenvalues.map((re, k) => Math.hypot(re, imaginaryEigenvalues[k])));
}
