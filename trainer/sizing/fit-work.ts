/**
 * The work of a fit, counted before it runs: how often each kind of step will be done, and how many numbers are held at the
 * worst moment. What one step takes is measured and stands in constants.ts.
 */
import type { Site } from '@stillwell/protocol';
import { LONG_FROM, RECENT_TICKS } from '../history/long-limits.ts';
import { designBank, featureCount } from '../identify/bank.ts';
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
}

/** The shape of a site's fit. */
export function fitShape(site: Site, extent: Extent, learnShare: number): FitShape {
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
  return {
    signals: signals.length,
    inputs: inputs.length,
    horizon,
    textBytes: extent.textBytes,
    readings: extent.readings,
    recentTicks,
    olderTicks: extent.ticks - recentTicks,
    features: featureCount(bank),
  };
}

/** Steps of a fit by what they do, and the numbers held at its peak; each in units of its own. */
export type Work = Readonly<Record<string, number>>;

/** How often each step is done. Names are those of SECONDS in constants.ts. */
export function timeWork(shape: FitShape): Work {
  const { signals, inputs, horizon, textBytes, readings, recentTicks, olderTicks, features } = shape;
  const channels = signals + inputs;
  const all = channels * features;
  return {
    start: 1,
    textByte: textBytes,
    reading: textBytes > 0 ? 0 : readings,
    recentReading: recentTicks * channels,
    recentFeature: recentTicks * all,
    featureCubed: all ** 3,
    signalSolve: signals * all ** 2,
    forecastCell: recentTicks * signals * horizon,
    olderPair: olderTicks * channels ** 2,
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
    streaming: olderTicks > 0 ? 1 : 0,
    streamedChannel: olderTicks > 0 ? channels : 0,
  };
}

/** What a bundle is made of. Names are those of BUNDLE in constants.ts. */
export function bundleWork(shape: FitShape): Work {
  const { signals, inputs, horizon } = shape;
  return { document: 1, channel: signals + inputs, bound: signals * horizon, map: signals * (signals + inputs) };
}

/** Work at what one unit of each takes. */
export function priced(work: Work, prices: Work): number {
  return Object.entries(work).reduce((sum, [name, count]) => sum + count * (prices[name] ?? 0), 0);
}
