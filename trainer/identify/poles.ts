/**
 * The bank's poles as flat arrays, and one tick of its recursion on changes of the readings: φ(t) = a φ(t-1) - a g Δ(t),
 * which is the filter's e - z or s - g z written without the level.
 */
import type { Bank } from './bank.ts';

/** The bank's poles and drives as flat arrays, one entry a mode (mean, resonator or level). */
export interface Poles {
  readonly count: number;
  /** Mode of the level; -1: none. It forgets nothing: its feature at the first reading is the reading's negative. */
  readonly level: number;
  /** Index of the mode's first feature within its channel. */
  readonly feature: Int32Array;
  readonly isComplex: Uint8Array;
  readonly poleRe: Float64Array;
  readonly poleIm: Float64Array;
  /** -a g, what a unit change of the reading adds to the feature. */
  readonly driveRe: Float64Array;
  readonly driveIm: Float64Array;
}

/**
 * Flattens a bank's means and resonators, and its level as a mean that never moves: pole 1, drive -1.
 *
 * shapes  every array (means + resonators + level)
 * units   poles per tick
 * throws  nothing
 * source  steady state g = (1 - |a|)/(1 - a) as in the filter's bank
 * cost    trivial
 */
export function flattenPoles(bank: Bank): Poles {
  const all: (readonly [number, number])[] = [...bank.decays.map((a) => [a, 0] as const), ...bank.resonators];
  const count = all.length + (bank.hasLevel === true ? 1 : 0);
  const poles: Poles = {
    count,
    level: bank.hasLevel === true ? all.length : -1,
    feature: new Int32Array(count),
    isComplex: new Uint8Array(count),
    poleRe: new Float64Array(count),
    poleIm: new Float64Array(count),
    driveRe: new Float64Array(count),
    driveIm: new Float64Array(count),
  };
  let feature = 0;
  all.forEach(([re, im], m) => {
    poles.feature[m] = feature;
    poles.isComplex[m] = m < bank.decays.length ? 0 : 1;
    feature += m < bank.decays.length ? 1 : 2;
    poles.poleRe[m] = re;
    poles.poleIm[m] = im;
    const away = (1 - re) * (1 - re) + im * im;
    const gain = 1 - Math.sqrt(re * re + im * im);
    const steadyRe = (gain * (1 - re)) / away;
    const steadyIm = (gain * im) / away;
    poles.driveRe[m] = -(re * steadyRe - im * steadyIm);
    poles.driveIm[m] = -(re * steadyIm + im * steadyRe);
  });
  if (poles.level >= 0) {
    poles.feature[poles.level] = feature;
    poles.poleRe[poles.level] = 1;
    poles.driveRe[poles.level] = -1;
  }
  return poles;
}

/**
 * Moves all features of all channels one tick on.
 *
 * shapes  phi (nc·F), changes (nc) of (ticks)
 * units   standardised
 * throws  nothing
 * source  file head
 * cost    O(nc F)
 */
export function advancePoles(poles: Poles, phi: Float64Array, changes: readonly Float64Array[], t: number): void {
  const perChannel = phi.length / changes.length;
  for (let c = 0; c < changes.length; c++) {
    const change = changes[c][t];
    for (let m = 0; m < poles.count; m++) {
      const f = c * perChannel + poles.feature[m];
      if (poles.isComplex[m] === 0) {
        phi[f] = poles.poleRe[m] * phi[f] + poles.driveRe[m] * change;
        continue;
      }
      const re = phi[f];
      const im = phi[f + 1];
      phi[f] = poles.poleRe[m] * re - poles.poleIm[m] * im + poles.driveRe[m] * change;
      phi[f + 1] = poles.poleRe[m] * im + poles.poleIm[m] * re + poles.driveIm[m] * change;
    }
  }
}
