/**
 * Which signals the modes drive: those whose changes the mode explains beyond what their own level does.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { Modes } from './modes.ts';

/** Share of the variance of the change that the modes must explain. */
const LEAST_SHARE = 0.04;
const MOST_DRIVEN = 6;

/**
 * Finds them, in the signals' order.
 *
 * shapes  values, isRead (nc) of (T)
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  own choice
 * cost    O(ny T)
 */
export function findDriven(
  values: readonly Float64Array[],
  isRead: readonly Uint8Array[],
  signalCount: number,
  modes: Modes,
  learnTicks: number,
): number[] {
  const found: { readonly signal: number; readonly share: number }[] = [];
  for (let i = 0; i < signalCount; i++) {
    if (modes.discrete.includes(i)) continue;
    const share = explained(values[i], isRead[i], modes, learnTicks);
    if (share >= LEAST_SHARE) found.push({ signal: i, share });
  }
  found.sort((a, b) => b.share - a.share || a.signal - b.signal);
  return found
    .slice(0, MOST_DRIVEN)
    .map((one) => one.signal)
    .sort((a, b) => a - b);
}

/** What knowing the mode takes off the variance of the change, as a share. */
function explained(z: Float64Array, isRead: Uint8Array, modes: Modes, ticks: number): number {
  const without = restOf(z, isRead, modes.of, 1, ticks);
  const within = restOf(z, isRead, modes.of, modes.count, ticks);
  return without > 0 ? 1 - within / without : 0;
}

/** Sum of squares of the change left by a constant and the level, by mode or for all modes together. */
function restOf(z: Float64Array, isRead: Uint8Array, mode: Int8Array, groups: number, ticks: number): number {
  const gram = new Float64Array(groups * 4);
  const right = new Float64Array(groups * 2);
  let energy = 0;
  for (let t = 1; t < ticks; t++) {
    if (mode[t] < 0 || mode[t] !== mode[t - 1] || isRead[t] + isRead[t - 1] < 2) continue;
    const g = groups === 1 ? 0 : mode[t];
    const change = z[t] - z[t - 1];
    gram[4 * g]++;
    gram[4 * g + 2] += z[t - 1];
    gram[4 * g + 3] += z[t - 1] * z[t - 1];
    right[2 * g] += change;
    right[2 * g + 1] += z[t - 1] * change;
    energy += change * change;
  }
  for (let g = 0; g < groups; g++) {
    const own = gram.slice(4 * g, 4 * g + 4);
    own[0] += 1;
    own[3] += 1;
    const beta = right.slice(2 * g, 2 * g + 2);
    solveCholesky(cholesky(own, 2), 2, beta, 1);
    energy -= beta[0] * right[2 * g] + beta[1] * right[2 * g + 1];
  }
  return Math.max(0, energy);
}
