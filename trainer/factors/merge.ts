/** Factors of two adjoining spans made one, and factors made lighter by age. */
import { TrainError } from '../errors.ts';
import type { Factors } from './factors.ts';
import { FactorsGatherer, mostEnds } from './gather.ts';
import { gridOf } from './moments.ts';
import { MutableSums, SUM_ARRAYS, scaleSums } from './run-sums.ts';
import { addRungOut, moveRungOut, ringOut } from './rung-out.ts';

/**
 * Factors of everything that either holds, `b` after `a`: as if both had been gathered one after the other with a long gap
 * between them, since what `b` began with was at rest. Where the second span is still at hand as readings, a gatherer that
 * starts from `a` joins it on without one.
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
  const ended = closed(a);
  const old = forget(ended, settledTick(b) - settledTick(ended));
  const newer = aboutOffsets(b, old.offsets);
  const sums = new MutableSums(newer.sums);
  for (const key of SUM_ARRAYS) for (let k = 0; k < sums[key].length; k++) sums[key][k] += old.sums[key][k];
  sums.count += old.sums.count;
  const ends = [...old.ends, ...newer.ends];
  // As a gatherer has it: those of runs that ended, and the open one's.
  const isOpen = b.open !== null && b.open.ticks >= b.longestHorizon + 2;
  const most = mostEnds(a.names.length, gridOf(a).lags.length) + (isOpen ? 1 : 0);
  let rungOut = addRungOut(old.rungOut, 1, newer.rungOut);
  for (const end of ends.slice(0, -most)) rungOut = ringOut(rungOut, end);
  return Object.freeze({
    ...newer,
    fromTick: a.fromTick,
    ticks: a.ticks + b.ticks,
    sums: sums.copy(),
    ends: ends.slice(-most),
    rungOut,
  });
}

/** The factors with their last run ended and nothing waiting: what comes after begins at rest. */
function closed(factors: Factors): Factors {
  const gatherer = new FactorsGatherer(factors, factors);
  const { toTick, names, tickMs, signalCount } = factors;
  const ticks = 2;
  const nothing = names.map(() => new Float64Array(ticks).fill(Number.NaN));
  const excluded = { isExcluded: new Uint8Array(ticks).fill(1), entries: [] };
  const digest = new Uint8Array(32);
  gatherer.take({ tickMs, firstTick: toTick, ticks, names, signalCount, values: nothing, digest, excluded });
  return gatherer.end();
}

/** First tick that is not in the sums yet; weights are as of the one before. */
function settledTick({ toTick, waiting }: Factors): number {
  return toTick - waiting.isExcluded.length;
}

/** The same factors with levels counted from other offsets; a channel without one keeps its own. */
function aboutOffsets(factors: Factors, wanted: Float64Array): Factors {
  const nc = wanted.length;
  const moved = wanted.map((offset, c) => {
    const by = factors.offsets[c] - offset;
    return Number.isNaN(by) ? 0 : by;
  });
  const sums = new MutableSums(factors.sums);
  const horizon = factors.longestHorizon;
  const from = factors.sums;
  for (let i = 0; i < nc; i++) {
    for (let j = 0; j < nc; j++) {
      const pair = i * nc + j;
      const back = j * nc + i;
      const [x, y] = [moved[i], moved[j]];
      sums.levels[pair] += y * from.levelSums[pair] + x * from.levelSums[back] + x * y * from.counts[pair];
      sums.levelSums[pair] += x * from.counts[pair];
      sums.levelChanges[pair] += y * from.changeSums[pair];
      sums.firstLevels[pair] += y * from.firstSums[pair] + x * from.firstSums[back] + x * y * from.firstCounts[pair];
      sums.firstSums[pair] += x * from.firstCounts[pair];
      for (let k = pair * horizon; k < (pair + 1) * horizon; k++) sums.headLevels[k] += y * from.headSums[k];
    }
  }
  const shifted = <T extends { readonly level: Float64Array; readonly isThere: Uint8Array }>(run: T): T => ({
    ...run,
    level: run.level.map((value, c) => value + run.isThere[c] * moved[c]),
  });
  return {
    ...factors,
    offsets: wanted.map((offset, c) => (Number.isNaN(offset) ? factors.offsets[c] : offset)),
    sums: sums.copy(),
    ends: factors.ends.map(shifted),
    rungOut: moveRungOut(factors, moved),
    open: factors.open && shifted(factors.open),
  };
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
  const rungOut = addRungOut(factors.rungOut, factor, null);
  return Object.freeze({ ...factors, sums: sums.copy(), ends, rungOut });
}

/**
 * Factors of several spans made one, in whatever order they are given.
 *
 * shapes  at least one
 * units   raw
 * throws  as `mergeFactors`
 * source  as `mergeFactors`
 * cost    as `mergeFactors`, a span
 */
export function joinFactors(spans: readonly Factors[]): Factors {
  return spans.toSorted((a, b) => a.fromTick - b.fromTick).reduce((all, next) => mergeFactors(all, next));
}
