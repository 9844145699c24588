/**
 * What makes crossing probabilities come true more often as said, found on the calibration part: how much of the one-step
 * error comes anew at every step, and a rising table for what is still off, kept only where it helps on the other half.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { type AskedLimit, askEvery, type CrossingPair, Crossings, usualLimits } from './crossings.ts';
import { crossingTable } from './reliability.ts';
import { replay } from './replay.ts';

/** Shares of the one-step error that are tried; the first stands where nothing is crossed that could tell. */
const FRESH = [0.5, 1, 0.25] as const;
/** Crossings without which nothing is learned. */
const LEAST_CROSSINGS = 30;
/** Fall of the Brier score, on halves that the table was not learned from, that is worth a table. */
const LEAST_GAIN = 0.02;

/**
 * Learns. The share is learned from the usual limits and those declared, the table from those it will be used for: the
 * declared ones, or the usual ones where none is declared.
 *
 * shapes  calibrated model; span of indices into the series
 * units   limits in the signals' units
 * throws  FilterError if the model does not fit the series
 * source  see reliability.ts
 * cost    one replay of the span, and for each share one look along the horizon at every limit and origin
 */
export function learnCrossing(
  model: Model,
  series: Series,
  span: TickSpan,
  declared: readonly AskedLimit[],
): { readonly crossingFresh: number; readonly crossingMap?: Float64Array } {
  const H = model.horizon;
  const usual = usualLimits(series, { fromTick: 0, toTick: span.fromTick });
  const readings = series.values
    .slice(0, model.signalCount)
    .map((y, i) => y.map((value) => Math.min(model.clipHigh[i], Math.max(model.clipLow[i], value))));
  const asked = FRESH.map((crossingFresh) => {
    const own = { ...model, crossingFresh };
    const ask = (limits: readonly AskedLimit[]): Crossings => new Crossings(own, limits, readings, span.toTick);
    return { crossingFresh, usual: ask(usual), declared: ask(declared) };
  });
  const every = askEvery(span.toTick - span.fromTick - H, usual.length + declared.length);
  replay(model, series, { fromTick: span.fromTick, toTick: span.toTick }, (moment) => {
    if ((moment.at - span.fromTick) % every !== 0 || series.excluded?.isExcluded[moment.at] === 1) return;
    for (const one of asked) {
      one.usual.visit(moment);
      one.declared.visit(moment);
    }
  });
  const scored = asked.map((one) => ({ ...one, brier: brier([...one.usual.pairs, ...one.declared.pairs]) }));
  const isTold = scored[0].usual.pairs.filter((pair) => pair.cameTrue).length >= LEAST_CROSSINGS;
  const best = isTold ? scored.reduce((a, b) => (b.brier < a.brier ? b : a)) : scored[0];
  const pairs = declared.length > 0 ? best.declared.pairs : best.usual.pairs;
  const worth = Math.min(1, every / H);
  const { crossingFresh } = best;
  return helps(pairs, worth) ? { crossingFresh, crossingMap: crossingTable(pairs, worth) } : { crossingFresh };
}

/** Whether a table learned from either half of the time lowers the Brier score on the other. */
function helps(pairs: readonly CrossingPair[], worth: number): boolean {
  if (pairs.filter((pair) => pair.cameTrue).length < LEAST_CROSSINGS) return false;
  const middle = Math.floor(pairs.length / 2);
  const halves = [pairs.slice(0, middle), pairs.slice(middle)];
  return halves.every((half, k) => {
    const table = crossingTable(halves[1 - k], worth);
    const put = half.map((pair) => ({ ...pair, said: tableValue(table, pair.said) }));
    return brier(put) <= (1 - LEAST_GAIN) * brier(half);
  });
}

function brier(pairs: readonly CrossingPair[]): number {
  return pairs.reduce((sum, pair) => sum + (pair.said - Number(pair.cameTrue)) ** 2, 0) / pairs.length;
}

/** The filter's own reading of such a table. */
function tableValue(table: Float64Array, said: number): number {
  let k = 1;
  while (said > CROSSING_KNOTS[k]) k++;
  const share = (said - CROSSING_KNOTS[k - 1]) / (CROSSING_KNOTS[k] - CROSSING_KNOTS[k - 1]);
  return table[k - 1] + share * (table[k] - table[k - 1]);
}
