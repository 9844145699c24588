/**
 * The work of a fit, counted before it runs: how often each kind of step will be done, and how many numbers are held at the
 * worst moment. What one step takes is measured and stands in constants.ts.
 */
import type { Site } from '@stillwell/protocol';
import { shapeOf } from '../factors/site-shape.ts';
import { LONG_FROM, RECENT_TICKS } from '../history/long-limits.ts';
import { designBank, featureCount } from '../identify/bank.ts';
import { BUNDLE } from './constants.ts';
import { factorsBytes } from './factors-size.ts';
import type { Extent } from './history-extent.ts';

const DAY_MS = 86_400_000;
/** A period is looked for where the history holds it so many times. */
const LEAST_PERIODS = 3;
/** Fewer ticks a period than this show no shape. */
const LEAST_PERIOD_TICKS = 4;

/** What a fit's cost hangs on. */
export interface FitShape {
  readonly signals: number;
  readonly inputs: number;
  readonly horizon: number;
  readonly textBytes: number;
  readonly readings: number;
  /** In memory at once. */
  readonly recentTicks: number;
  /** Streamed past. */
  readonly olderTicks: number;
  /** Features a channel of the widest bank that is tried. */
  readonly features: number;
  /** The linear kind will hardly fit the bytes, so that the dense one is tried beside it. */
  readonly isTight: boolean;
  /** Bytes of the factors, and lags of all pairs of channels in them; 0 where the site goes without. */
  readonly factorsBytes: number;
  readonly laggedPairs: number;
}

/** What of a fit's options its cost hangs on. */
export interface CostOptions {
  readonly learnShare: number;
  readonly maxBytes: number;
}

/** Share of the bytes from which on a bundle is tight. */
const TIGHT_SHARE = 0.75;

/** The shape of a site's fit. */
export function fitShape(site: Site, extent: Extent, { learnShare, maxBytes }: CostOptions): FitShape {
  const { tickMs, horizon, signals, inputs, calendar } = site;
  const isLong = extent.ticks > LONG_FROM;
  const recentTicks = isLong ? RECENT_TICKS : extent.ticks;
  const day = DAY_MS / tickMs;
  const hasDay = calendar.timeOfDay && day >= LEAST_PERIOD_TICKS && recentTicks >= LEAST_PERIODS * day;
  const bank = designBank({
    periodTicks: hasDay ? Math.round(day) : 0,
    otherPeriods: [],
    horizon,
    learnTicks: Math.round(learnShare * recentTicks),
    channelCount: signals.length + inputs.length,
  });
  const channels = { signals: signals.length, inputs: inputs.length, horizon, recentTicks };
  const factors = factorsBytes(site, extent.ticks);
  return {
    ...channels,
    factorsBytes: factors ?? 0,
    laggedPairs: factors === null ? 0 : (signals.length + inputs.length) ** 2 * shapeOf(site, null).reach,
    isTight: priced(bundleWork(channels), BUNDLE) > TIGHT_SHARE * maxBytes,
    textBytes: extent.textBytes,
    readings: extent.readings,
    olderTicks: extent.ticks - recentTicks,
    features: featureCount(bank),
  };
}

/** Steps of a fit by what they do, and the numbers held at its peak; each in units of its own. */
export type Work = Readonly<Record<string, number>>;

/** Origins at which a replay is scored, at most (judge/hindcast.ts). */
const MOST_SCORED = 6000;
/** Share of the recent ticks that each replay goes over. */
const REPLAYED_SHARE = 0.2;

/** How often each step is done. Names are those of SECONDS in constants.ts. */
export function timeWork(shape: FitShape): Work {
  const { signals, inputs, horizon, textBytes, readings, recentTicks, olderTicks, features, isTight } = shape;
  const channels = signals + inputs;
  const all = channels * features;
  const scored = Math.min(MOST_SCORED, REPLAYED_SHARE * recentTicks);
  return {
    start: 1,
    textByte: textBytes,
    columnReading: textBytes > 0 ? 0 : readings,
    recentReading: recentTicks * channels,
    featureCubed: all ** 3,
    forecastCell: scored * signals * horizon,
    tightSolve: isTight ? all ** 3 : 0,
    tightPair: isTight ? recentTicks * channels ** 2 : 0,
    factorsByte: shape.factorsBytes,
    laggedPair: shape.laggedPairs,
    olderPair: olderTicks * channels ** 2,
    olderReading: olderTicks * channels,
    streaming: olderTicks > 0 ? 1 : 0,
  };
}

/** Numbers held. Names are those of BYTES in constants.ts. */
export function memoryWork(shape: FitShape): Work {
  const { signals, inputs, horizon, recentTicks, olderTicks, features } = shape;
  const channels = signals + inputs;
  return {
    program: 1,
    recentReading: recentTicks * channels,
    recentTick: recentTicks,
    featurePair: (channels * features) ** 2,
    forecastCell: signals * horizon * channels * features,
    factorsByte: shape.factorsBytes,
    laggedPair: shape.laggedPairs,
    streaming: olderTicks > 0 ? 1 : 0,
    streamedByte: olderTicks > 0 ? shape.factorsBytes : 0,
  };
}

/**
 * What a bundle is made of: bounds for each step, and a state that is the longer the more there is to forecast and to learn it
 * from. How long it comes out depends on the plant, so this is right within a factor of two at best. Names are those of
 * BUNDLE in constants.ts.
 */
export function bundleWork({
  signals,
  horizon,
  recentTicks,
}: Pick<FitShape, 'signals' | 'horizon' | 'recentTicks'>): Work {
  return {
    document: 1,
    bound: signals * horizon,
    state: Math.sqrt(signals * horizon),
    learned: signals * Math.log(Math.max(1, recentTicks)),
  };
}

/** Work at what one unit of each takes. */
export function priced(work: Work, prices: Work): number {
  return Object.entries(work).reduce((sum, [name, count]) => sum + count * (prices[name] ?? 0), 0);
}
