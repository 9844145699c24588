/**
 * What makes crossing probabilities come true more often as said, found on the calibration part: how much of the one-step
 * error comes anew at every step, and rising tables for what is still off, one for all signals and one for each signal's
 * own cycle, kept only where they help on the other half.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import type { Model, OwnCrossingMap } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { type AskedLimit, askEvery, type CrossingPair, Crossings, clipped, usualLimits } from './crossings.ts';
import { crossingTable } from './reliability.ts';
import { type Moment, replay } from './replay.ts';

/** Shares of the one-step error that are tried; the first stands where nothing is crossed that could tell. */
const FRESH = [0.5, 1, 0.25] as const;
/** Crossings without which nothing is learned. */
const LEAST_CROSSINGS = 30;
/** Fall of the Brier score, on halves that the table was not learned from, that is worth a table. */
const LEAST_GAIN = 0.02;
/** Rise of the declared limits' Brier score that a signal's own table may cost: chances off by one in a hundred. */
const MOST_HARM = 1e-4;

/** What is learned; a null where a signal has no table of its own. */
export interface LearnedCrossing {
  readonly crossingFresh: number;
  readonly crossingMap?: Float64Array;
  readonly crossingMaps: readonly (OwnCrossingMap | null)[];
}

/** Pairs of one signal. */
interface Asked {
  /** Limits where it often goes, lowest and highest, standardised; its own table holds there. */
  readonly low: number;
  readonly high: number;
  readonly usual: Crossings;
  /** Of the declared limits those that a table of its own would touch, and those that it would not. */
  readonly near: Crossings;
  readonly far: Crossings;
}

/**
 * Learns. The share is learned from the usual limits and those declared; the table of all signals from those it will be
 * used for: the declared ones, or the usual ones where none is declared. A signal's own table takes the place of that, and is
 * learned from the usual limits, or from declared ones near those where they are crossed often enough: alarms are seldom
 * crossed, while what is said of a plant's own cycle can be far off. It holds where the signal often goes, not for alarms.
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
): LearnedCrossing {
  const H = model.horizon;
  const usual = usualLimits(series, { fromTick: 0, toTick: span.fromTick });
  const readings = series.values
    .slice(0, model.signalCount)
    .map((y, i) => clipped(y, model.clipLow[i], model.clipHigh[i]));
  const { crossingMap: _, crossingMaps: __, ...plain } = model;
  const asked = FRESH.map((crossingFresh) => {
    const own = { ...plain, crossingFresh } as Model;
    const ask = (limits: readonly AskedLimit[]): Crossings => new Crossings(own, limits, readings, span.toTick);
    const signals = readings.map((_, signal): Asked => {
      const zOf = ({ value }: AskedLimit): number => (value - model.mean[signal]) / model.scale[signal];
      const often = usual.filter((limit) => limit.signal === signal);
      const low = Math.floor(10 * Math.min(...often.map(zOf))) / 10;
      const high = Math.ceil(10 * Math.max(...often.map(zOf))) / 10;
      const named = declared.filter((limit) => limit.signal === signal);
      const isNear = (limit: AskedLimit): boolean => zOf(limit) > low - 1 && zOf(limit) < high + 1;
      const [near, far] = [named.filter(isNear), named.filter((limit) => !isNear(limit))];
      return { low, high, usual: ask(often), near: ask(near), far: ask(far) };
    });
    return { crossingFresh, signals };
  });
  const every = askEvery(span.toTick - span.fromTick - H, usual.length + declared.length);
  const ask = (moment: Moment): void => {
    if ((moment.at - span.fromTick) % every !== 0 || series.excluded?.isExcluded[moment.at] === 1) return;
    for (const { signals } of asked) {
      for (const one of signals) {
        for (const crossings of [one.usual, one.near, one.far]) crossings.visit(moment);
      }
    }
  };
  replay(model, series, span, ask, { wantsBounds: () => false });
  const scored = asked.map((one) => ({ ...one, brier: brier(one.signals.flatMap(allOf)) }));
  const isTold = cameTrue(scored[0].signals.flatMap(({ usual }) => usual.pairs)) >= LEAST_CROSSINGS;
  const { crossingFresh, signals } = isTold ? scored.reduce((a, b) => (b.brier < a.brier ? b : a)) : scored[0];
  const worth = Math.min(1, every / H);
  const isDeclared = declared.length > 0;
  const shared = halvesOf(signals.map((one) => (isDeclared ? named(one) : one.usual.pairs)));
  const crossingMap = helps(shared, [], worth) ? { crossingMap: crossingTable(shared.flat(), worth) } : {};
  return { crossingFresh, ...crossingMap, crossingMaps: signals.map((one) => ownTable(one, worth)) };
}

const named = ({ near, far }: Asked): readonly CrossingPair[] => [...near.pairs, ...far.pairs];
const allOf = (asked: Asked): readonly CrossingPair[] => [...asked.usual.pairs, ...named(asked)];

/** A signal's own table, to whole hundredths as a bundle has it, or null where it does not help. */
function ownTable({ low, high, usual, near }: Asked, worth: number): OwnCrossingMap | null {
  const isOften = cameTrue(near.pairs) >= LEAST_CROSSINGS;
  const halves = halvesOf(isOften ? [near.pairs] : [usual.pairs, near.pairs]);
  if (!helps(halves, halvesOf([near.pairs]), worth)) return null;
  return { low, high, map: crossingTable(halves.flat(), worth).map((share) => Math.round(100 * share) / 100) };
}

/** Each list's first halves, which come earlier, and its second ones. */
function halvesOf(lists: readonly (readonly CrossingPair[])[]): [CrossingPair[], CrossingPair[]] {
  return [
    lists.flatMap((pairs) => pairs.slice(0, Math.floor(pairs.length / 2))),
    lists.flatMap((pairs) => pairs.slice(Math.floor(pairs.length / 2))),
  ];
}

/**
 * Whether a table learned from either half of the time lowers the Brier score on the other, and harms what is said of the
 * `guarded` on neither. Where what is said is worse than always saying how often limits were crossed, any gain will do.
 */
function helps(
  halves: readonly (readonly CrossingPair[])[],
  guarded: readonly (readonly CrossingPair[])[],
  worth: number,
): boolean {
  if (cameTrue(halves.flat()) < LEAST_CROSSINGS) return false;
  return halves.every((half, k) => {
    const table = crossingTable(halves[1 - k], worth);
    const share = cameTrue(half) / half.length;
    const gain = brier(half) > share * (1 - share) ? 0 : LEAST_GAIN;
    const kept = guarded[k] ?? [];
    const isHarmed = kept.length > 0 && brier(kept, table) > brier(kept) + MOST_HARM;
    return !isHarmed && brier(half, table) <= (1 - gain) * brier(half);
  });
}

function cameTrue(pairs: readonly CrossingPair[]): number {
  return pairs.filter((pair) => pair.cameTrue).length;
}

/** Brier score of what was said, or of what a table makes of it. */
function brier(pairs: readonly CrossingPair[], table: Float64Array | null = null): number {
  let sum = 0;
  for (const { said, cameTrue } of pairs) {
    const off = (table === null ? said : tableValue(table, said)) - Number(cameTrue);
    sum += off ** 2;
  }
  return sum / pairs.length;
}

/** The filter's own reading of such a table. */
function tableValue(table: Float64Array, said: number): number {
  let k = 1;
  while (said > CROSSING_KNOTS[k]) k++;
  const share = (said - CROSSING_KNOTS[k - 1]) / (CROSSING_KNOTS[k] - CROSSING_KNOTS[k - 1]);
  return table[k - 1] + share * (table[k] - table[k - 1]);
}
