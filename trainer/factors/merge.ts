/** Factors of two adjoining spans made one, and factors made lighter by age. */
import { TrainError } from '../errors.ts';
import type { Factors } from './factors.ts';
import { mostEnds } from './gather.ts';
import { gridOf } from './moments.ts';
import { MutableSums, SUM_ARRAYS, scaleSums } from './run-sums.ts';

/**
 * Factors of everything that either holds, `b` after `a`.
 *
 * shapes  none
 * units   raw
 * throws  TrainError 'factors' where they overlap in time or are not of one site, tick, reach and half-life
 * source  sums are additive
 * cost    the size of the factors
 */
export function mergeFactors(a: Factors, b: Factors): Factors {
  for (const key of [
    'site',
    'tickMs',
    'schema',
    'halfLifeTicks',
    'reach',
    'longestHorizon',
    'longestRound',
    'longGapTicks',
  ] as const) {
    if (a[key] === b[key]) continue;
    throw new TrainError(
      'factors',
      `factors with ${key} ${a[key]} and ${b[key]} cannot be joined; gather one of them anew`,
      {
        details: { key, a: a[key], b: b[key] },
      },
    );
  }
  if (b.fromTick < a.toTick) {
    throw new TrainError(
      'factors',
      `factors from ${new Date(b.fromTick * b.tickMs).toISOString()} begin before those they follow end, at ` +
        `${new Date(a.toTick * a.tickMs).toISOString()}; what both hold would count twice: give spans that do not overlap`,
      { details: { fromTick: b.fromTick, toTick: a.toTick } },
    );
  }
  const old = forget(a, b.toTick - a.toTick);
  const sums = new MutableSums(b.sums);
  for (const key of SUM_ARRAYS) for (let k = 0; k < sums[key].length; k++) sums[key][k] += old.sums[key][k];
  sums.count += old.sums.count;
  const most = mostEnds(a.names.length, gridOf(a).lags.length);
  return Object.freeze({
    ...b,
    fromTick: a.fromTick,
    ticks: a.ticks + b.ticks,
    sums: sums.copy(),
    ends: [...old.ends, ...b.ends].slice(-most),
  });
}

/**
 * The factors as they weigh so many ticks later.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  2^(-ticks / half-life)
 * cost    one copy
 */
export function forget(factors: Factors, ticks: number): Factors {
  if (factors.halfLifeTicks === null || ticks === 0) return factors;
  const factor = 2 ** (-ticks / factors.halfLifeTicks);
  const sums = new MutableSums(factors.sums);
  scaleSums(sums, factor);
  const ends = factors.ends.map((end) => ({ ...end, weight: end.weight * factor }));
  return Object.freeze({ ...factors, sums: sums.copy(), ends });
}
