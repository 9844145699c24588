/**
 * Differences between the modes' drifts from what happens at the switches themselves: straight lines through a few ticks
 * before and after, carried on to the switch from both sides. The disturbance goes on through a switch, so their distance is
 * the equipment's. Regression over whole stays mixes the two: a second pump runs while a storm swells, and looks weak.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { type Drift, type DrivenHistory, isSteady } from './drift.ts';

/** Ticks looked at on each side, at least and at most. */
const LEAST_TICKS = 4;
const MOST_TICKS = 7;
/** The drift that regression found counts as much as this many switches. */
const PRIOR_SWITCHES = 1;

/**
 * Drift with the differences between modes taken from the switches; couplings as they stand.
 *
 * shapes  as Drift
 * units   standardised
 * throws  TrainError 'fit' if the solve fails
 * source  local linear regression at a discontinuity: Hahn, Todd & van der Klaauw, Econometrica 69 (2001); medians over
 *         the switches of a pair; least squares over the pairs
 * cost    O(n² T)
 */
export function driftBySwitches(history: DrivenHistory, found: Drift): Drift {
  const n = history.values.length;
  const drift = found.drift.slice();
  for (let i = 0; i < n; i++) {
    const rest = restOf(history, found, i);
    refine(history, rest, i, drift, n);
  }
  return { drift, coupling: found.coupling };
}

/** (ticks) change less coupling; NaN where not steady. */
function restOf(history: DrivenHistory, { coupling }: Drift, i: number): Float64Array {
  const { values, mode, ticks } = history;
  const n = values.length;
  const out = new Float64Array(ticks).fill(Number.NaN);
  for (let t = 1; t < ticks; t++) {
    if (!isSteady(history, i, t)) continue;
    let rest = values[i][t] - values[i][t - 1];
    for (let j = 0; j < n; j++) rest -= coupling[(mode[t] * n + i) * n + j] * values[j][t - 1];
    out[t] = rest;
  }
  return out;
}

function refine(history: DrivenHistory, rest: Float64Array, i: number, drift: Float64Array, n: number): void {
  const { modeCount: M } = history;
  const pairs = jumpsOf(history, rest);
  const gram = new Float64Array(M * M);
  const right = new Float64Array(M);
  for (let m = 0; m < M; m++) {
    gram[m * (M + 1)] += PRIOR_SWITCHES;
    right[m] += PRIOR_SWITCHES * drift[m * n + i];
  }
  for (const [key, sizes] of pairs) {
    const from = Math.floor(key / M);
    const to = key % M;
    const weight = sizes.length;
    const size = median(sizes);
    gram[from * (M + 1)] += weight;
    gram[to * (M + 1)] += weight;
    gram[from * M + to] -= weight;
    gram[to * M + from] -= weight;
    right[to] += weight * size;
    right[from] -= weight * size;
  }
  solveCholesky(cholesky(gram, M), M, right, 1);
  // The level common to all modes is not seen at the switches: the disturbance is to have mean zero.
  let sum = 0;
  let count = 0;
  for (let t = 1; t < rest.length; t++) {
    if (Number.isNaN(rest[t])) continue;
    sum += rest[t] - right[history.mode[t]];
    count++;
  }
  for (let m = 0; m < M; m++) drift[m * n + i] = right[m] + (count > 0 ? sum / count : 0);
}

/** Jumps by ordered pair of modes, from · M + to. */
function jumpsOf(history: DrivenHistory, rest: Float64Array): Map<number, number[]> {
  const { mode, modeCount: M, ticks } = history;
  const out = new Map<number, number[]>();
  for (let t = 1; t < ticks; t++) {
    if (mode[t] < 0 || mode[t - 1] < 0 || mode[t] === mode[t - 1]) continue;
    const before = lineTo(rest, t - 1, -1, mode, mode[t - 1]);
    const after = lineTo(rest, t + 1, 1, mode, mode[t]);
    if (before === null || after === null) continue;
    const key = mode[t - 1] * M + mode[t];
    const sizes = out.get(key);
    if (sizes === undefined) out.set(key, [after - before]);
    else sizes.push(after - before);
  }
  return out;
}

/** Value at one tick before `from` (against `step`) of the line through the ticks from there on; null where too few. */
function lineTo(rest: Float64Array, from: number, step: number, mode: Int8Array, own: number): number | null {
  let count = 0;
  let sumX = 0;
  let sumY = 0;
  let sumXX = 0;
  let sumXY = 0;
  for (let k = 1, t = from; k <= MOST_TICKS && t > 0 && t < rest.length; k++, t += step) {
    if (mode[t] !== own || Number.isNaN(rest[t])) break;
    count++;
    sumX += k;
    sumY += rest[t];
    sumXX += k * k;
    sumXY += k * rest[t];
  }
  if (count < LEAST_TICKS) return null;
  const slope = (count * sumXY - sumX * sumY) / (count * sumXX - sumX * sumX);
  return (sumY - slope * sumX) / count;
}

function median(values: readonly number[]): number {
  const sorted = values.slice().sort((a, b) => a - b);
  const middle = sorted.length >> 1;
  return sorted.length % 2 === 1 ? sorted[middle] : (sorted[middle - 1] + sorted[middle]) / 2;
}
