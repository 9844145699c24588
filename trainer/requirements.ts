/**
 * What a history and the options must be before any learning starts. Checked once, at the door.
 */
import type { Site } from '@stillwell/protocol';
import { TrainError } from './errors.ts';
import { ticksLeft } from './exclusions.ts';
import { suggestTick } from './history/cadence.ts';
import { lengthOf } from './history/finding.ts';
import { quantiles } from './history/order-statistics.ts';
import type { Series } from './history/series.ts';
import type { TickSpan } from './span.ts';

/** The three parts of a history, in ticks since 1970. */
export interface Split {
  readonly learn: TickSpan;
  readonly calibrate: TickSpan;
  readonly judged: TickSpan;
}

/** Ticks that each part must hold: whole horizons, and some origins beyond them. */
const LEAST_LEARN = { horizons: 6, ticks: 36 } as const;
const LEAST_OTHER = { horizons: 2, ticks: 12 } as const;

/** What the checks look at. */
export interface Asked {
  readonly learnShare: number;
  readonly calibrateShare: number;
  readonly maxBytes: number;
  readonly coverage: number;
}

/**
 * Refuses options outside their ranges.
 *
 * throws  TrainError 'options' naming the option, expected and got
 */
export function checkOptions(asked: Asked): void {
  const { learnShare, calibrateShare, maxBytes, coverage } = asked;
  const refuse = (option: string, expected: string, got: number): never => {
    throw new TrainError('options', `${option}: expected ${expected}, got ${got}.`, { details: { option, got } });
  };
  if (!(learnShare > 0 && learnShare < 1)) refuse('--learn-share', 'a share between 0 and 1', learnShare);
  if (!(calibrateShare > 0 && calibrateShare < 1))
    refuse('--calibrate-share', 'a share between 0 and 1', calibrateShare);
  if (!(learnShare + calibrateShare < 1 - 1e-9)) {
    refuse(
      '--learn-share plus --calibrate-share',
      'less than 1, so that something is left to judge by',
      learnShare + calibrateShare,
    );
  }
  if (!(maxBytes >= 2048 && maxBytes <= 65536)) refuse('--max-bytes', '2048 to 65536 bytes', maxBytes);
  if (!(coverage >= 0.5 && coverage <= 0.99)) refuse('coverage', '0.5 to 0.99', coverage);
}

/**
 * Cuts a history into its three parts and refuses one that is too short.
 *
 * throws  TrainError 'history' saying how many ticks there are and how many are needed
 */
export function splitHistory(series: Series, site: Site, asked: Asked): Split {
  const { horizon } = site;
  const got = `${series.ticks} ticks of ${site.tickMs / 1000} s`;
  if (horizon >= series.ticks) {
    throw new TrainError(
      'history',
      `The horizon of ${horizon} ticks is longer than the history of ${got}. Shorten the horizon in the site file or give a longer history.`,
      { details: { ticks: series.ticks, horizon } },
    );
  }
  const judgeShare = 1 - asked.learnShare - asked.calibrateShare;
  const least = (part: { horizons: number; ticks: number }): number => part.horizons * horizon + part.ticks;
  const needed = Math.ceil(
    Math.max(
      least(LEAST_LEARN) / asked.learnShare,
      least(LEAST_OTHER) / asked.calibrateShare,
      least(LEAST_OTHER) / judgeShare,
    ),
  );
  if (series.ticks < needed) {
    throw new TrainError(
      'history',
      `The history holds ${got}; expected at least ${needed} for a horizon of ${horizon} ticks, so that each part is longer than ` +
        'the longest window. Give a longer history, a shorter horizon or a shorter tick.',
      { details: { ticks: series.ticks, needed } },
    );
  }
  const from = series.firstTick;
  const learnEnd = from + Math.round(asked.learnShare * series.ticks);
  const calibrateEnd = learnEnd + Math.round(asked.calibrateShare * series.ticks);
  refuseSparse(series);
  const split = {
    learn: { fromTick: from, toTick: learnEnd },
    calibrate: { fromTick: learnEnd, toTick: calibrateEnd },
    judged: { fromTick: calibrateEnd, toTick: from + series.ticks },
  };
  refuseExcluded(series, split.learn, 'learn from', least(LEAST_LEARN));
  refuseExcluded(series, split.calibrate, 'calibrate by', least(LEAST_OTHER));
  refuseExcluded(series, split.judged, 'judge by', least(LEAST_OTHER));
  return split;
}

/** Usual ticks from one with a reading to the next; from here on a model would learn its own bridges between them. */
const MOST_APART = 20;

/** A tick that is far too fine for any signal, told by the ticks between readings, which long gaps do not change. */
function refuseSparse(series: Series): void {
  const apart: number[] = [];
  let last = -1;
  for (let t = 0; t < series.ticks; t++) {
    if (!series.values.some((y) => !Number.isNaN(y[t]))) continue;
    if (last >= 0) apart.push(t - last);
    last = t;
  }
  const [usual] = quantiles(Float64Array.from(apart), [0.5]) as [number];
  if (!(usual >= MOST_APART)) return;
  throw new TrainError(
    'history',
    `Readings come usually ${usual} ticks of ${lengthOf(series.tickMs)} apart; expected a reading in one of ${MOST_APART} ticks at least. ` +
      `Take a tick of ${lengthOf(suggestTick([usual * series.tickMs]))} in the site file, and as many fewer ticks for the horizon.`,
    { details: { usual } },
  );
}

/** Too much excluded is like too short a history, but mended elsewhere. */
function refuseExcluded(series: Series, part: TickSpan, use: string, needed: number): void {
  if (series.excluded === undefined) return;
  const left = ticksLeft(series, part.fromTick - series.firstTick, part.toTick - series.firstTick);
  if (left >= needed) return;
  throw new TrainError(
    'history',
    `The site file's exclude leaves ${left} of the ${part.toTick - part.fromTick} ticks to ${use}; expected at least ${needed}. ` +
      'Exclude less, give a longer history, or shift the parts with --learn-share and --calibrate-share.',
    { details: { left, needed } },
  );
}
