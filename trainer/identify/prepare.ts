/**
 * A history made ready for learning: scaled, completed, its period and seasonal means found; and what was odd about it.
 */
import type { Signal, Site } from '@stillwell/protocol';
import type { Round, StuckGuard } from '@stillwell/runtime/filter';
import { excludedNotes, withoutExcluded } from '../exclusions.ts';
import { channelsOf } from '../history/channels.ts';
import type { Series } from '../history/series.ts';
import type { Surroundings } from '../quantise/float-model.ts';
import type { Split } from '../requirements.ts';
import { learnAgreement } from './agreement.ts';
import type { Earlier } from './earlier.ts';
import { type Excursion, findExcursions, withoutExcursions } from './excursions.ts';
import { type Filled, fillHistory, type PartEnds } from './fill.ts';
import type { LearnInput } from './learn.ts';
import { findPeriods } from './period.ts';
import { findScalings, type Scaling } from './scaling.ts';
import { seasonOf } from './season.ts';
import { findStuck, withoutStuck } from './stuck.ts';

/** Ready for learning. */
export interface Prepared {
  readonly around: Omit<Surroundings, 'bank' | 'round' | 'coverage' | 'boundsRate'>;
  /** The history without its wild readings and excluded time: what is learned and calibrated from. */
  readonly calm: Series;
  readonly filled: Filled;
  /** From when on a signal stands still. */
  readonly stuck: Omit<StuckGuard, 'acts'>;
  /** Periods beside the seasonal one, ticks. */
  readonly otherPeriods: readonly number[];
  readonly learnTicks: number;
  readonly calibrateTicks: number;
  /** What is known of the time before the history; null: nothing. */
  readonly earlier: Earlier | null;
  readonly warnings: readonly string[];
}

/** A gap of this many ticks is long, whatever the horizon. */
const LEAST_LONG_GAP = 6;

/**
 * Prepares.
 *
 * shapes  lattices (nc); hasEarlier: something is known of the time before the history as well
 * units   as the parts state
 * throws  TrainError 'history' naming a channel without readings, or where every signal is constant
 * source  none
 * cost    O(nc T log T)
 */
export function prepareHistory(
  seen: Series,
  site: Site,
  lattices: readonly { readonly step: number; readonly offset: number }[],
  split: Split,
  hasEarlier = false,
): Omit<Prepared, 'earlier'> {
  const series = withoutExcluded(seen);
  const learnTicks = split.learn.toTick - split.learn.fromTick;
  const calibrateTicks = split.calibrate.toTick - split.calibrate.fromTick;
  const stuck = findStuck(series, learnTicks);
  const steps = lattices.map((lattice) => lattice.step);
  const longGap = Math.max(LEAST_LONG_GAP, site.horizon);
  const ends = { learnTicks, calibrateEnd: learnTicks + calibrateTicks };
  const excursions = findExcursions(series, steps, longGap, ends);
  const calm = withoutExcursions(series, excursions);
  const found = findScalings(calm, learnTicks, ends.calibrateEnd, steps, hasEarlier);
  const scalings = found.map((scaling, c) => withinRange(scaling, channelsOf(site)[c]));
  const first = fillHistory(calm, scalings, 0, longGap, ends);
  const learning = first.values.slice(0, series.signalCount).map((z) => z.subarray(0, learnTicks));
  const { main: period, others } = findPeriods(learning, series.tickMs);
  const filled = period > 0 ? fillHistory(calm, scalings, period, longGap, ends) : first;
  return {
    around: {
      tickMs: series.tickMs,
      signalCount: series.signalCount,
      horizon: site.horizon,
      scalings,
      lattices,
      season: seasonOf(filled, series.signalCount, series.firstTick, learnTicks, period),
      warmupTicks: Math.max(2 * site.horizon, period, 32),
      agreement: learnAgreement(filled, series.signalCount, learnTicks, calibrateTicks),
    },
    calm,
    filled,
    stuck,
    otherPeriods: others,
    learnTicks,
    calibrateTicks,
    warnings: [
      ...excludedNotes(seen, hasEarlier),
      ...stuckWarnings(series, withoutStuck(series, stuck), ends),
      ...warningsOf(series, scalings, period),
      ...excursionWarnings(series, excursions, ends),
      ...silentWhereBoundsAreSet(series, ends),
    ],
  };
}

/**
 * The scalings with clips that leave room for every reading of the history: for a model that learns once more from all of it.
 *
 * shapes  result (nc)
 * units   the signals'
 * throws  nothing that `prepareHistory` did not
 * source  as `findScalings`
 * cost    O(nc T log T)
 */
export function scalingsForAll({ around, calm }: Prepared, site: Site): Scaling[] {
  const steps = around.lattices.map((lattice) => lattice.step);
  return findScalings(calm, calm.ticks, calm.ticks, steps).map((all, c) => {
    const own = around.scalings[c];
    const clipLow = Math.min(own.clipLow, all.clipLow);
    const clipHigh = Math.max(own.clipHigh, all.clipHigh);
    return own.isConstant ? own : withinRange({ ...own, clipLow, clipHigh }, channelsOf(site)[c]);
  });
}

/**
 * Clips no wider than the site file's range, beyond which no reading is taken: then no forecast or bound says what cannot
 * be. Sums and increments have no range of their own.
 */
function withinRange(scaling: Scaling, { range, aggregate }: Signal): Scaling {
  if (range === null || aggregate === 'sum' || aggregate === 'increment') return scaling;
  return {
    ...scaling,
    clipLow: Math.max(scaling.clipLow, range[0]),
    clipHigh: Math.min(scaling.clipHigh, range[1]),
  };
}

/** The part of it that learning takes. */
export function learnInput(prepared: Prepared, round: Round | null): LearnInput {
  const { around, filled, otherPeriods, learnTicks, calibrateTicks, earlier } = prepared;
  const { horizon, scalings, signalCount } = around;
  return {
    filled,
    signalCount: around.signalCount,
    horizon: around.horizon,
    periodTicks: around.season.periodTicks,
    otherPeriods,
    learnTicks,
    calibrateTicks,
    round,
    earlier: earlier && {
      ticks: earlier.ticks,
      of: (bank) => earlier.moments({ bank, horizon, scalings, signalCount, round }),
    },
  };
}

function warningsOf(series: Series, scalings: readonly Scaling[], period: number): string[] {
  const warnings: string[] = [];
  scalings.forEach((scaling, c) => {
    if (scaling.isConstant) {
      warnings.push(`${series.names[c]} keeps one value throughout the learning part; its forecast is its last value.`);
    }
    let beyond = 0;
    for (const value of series.values[c]) if (value < scaling.clipLow || value > scaling.clipHigh) beyond++;
    if (beyond > 0) {
      warnings.push(
        `${series.names[c]}: ${beyond === 1 ? '1 reading lies' : `${beyond} readings lie`} outside ${shorten(scaling.clipLow)} to ${shorten(scaling.clipHigh)}, far from the ` +
          'rest; left out of learning, and clipped by the gateway.',
      );
    }
  });
  if (period === 0) warnings.push('No period was found, so forecasts follow recent readings alone.');
  return warnings;
}

/** What hung before the judged part. */
function stuckWarnings(seen: Series, left: Series, ends: PartEnds): string[] {
  return seen.names.flatMap((name, c) => {
    let ticks = 0;
    let first = -1;
    for (let t = 0; t < ends.calibrateEnd; t++) {
      if (Number.isNaN(seen.values[c][t]) || !Number.isNaN(left.values[c][t])) continue;
      if (first < 0) first = t;
      ticks++;
    }
    if (ticks === 0) return [];
    const at = new Date((seen.firstTick + first) * seen.tickMs).toISOString();
    return `${name}: repeats one reading for longer than it ever does by nature, first at ${at}; ${ticks === 1 ? '1 tick' : `${ticks} ticks`} in all. If the sensor hung, exclude them in the site file.`;
  });
}

/** What was wild before the judged part: where it lies is worth a look. */
function excursionWarnings(series: Series, excursions: readonly Excursion[], ends: PartEnds): string[] {
  return series.names.flatMap((name, c) => {
    const own = excursions.filter(({ channel, toIndex }) => channel === c && toIndex <= ends.calibrateEnd);
    if (own.length === 0) return [];
    const ticks = own.reduce((sum, { fromIndex, toIndex }) => sum + toIndex - fromIndex, 0);
    const [first] = own;
    const at = new Date((series.firstTick + first.fromIndex) * series.tickMs).toISOString();
    return `${name}: jumps away and back as nowhere else ${own.length === 1 ? `at ${at}` : `${own.length} times, first at ${at}`}; ${ticks === 1 ? '1 tick' : `${ticks} ticks`} left out of learning.`;
  });
}

/** Signals whose bounds cannot be calibrated. */
function silentWhereBoundsAreSet(series: Series, ends: PartEnds): string[] {
  return series.names.slice(0, series.signalCount).flatMap((name, i) => {
    const isSilent = series.values[i].subarray(ends.learnTicks, ends.calibrateEnd).every(Number.isNaN);
    if (!isSilent) return [];
    return `${name} has no reading in the part that sets the bounds; they start as wide as the signal ever swings, and adapt.`;
  });
}

function shorten(value: number): string {
  return String(Number(value.toPrecision(4)));
}
