/**
 * From what the desk collected to a new candidate: archive and files become one series, the fit is the same as the first
 * one, and the candidate is held against the bundle that serves.
 */
import { describeSchemaDifference, type Site } from '@stillwell/protocol';
import type { OpenDocument } from '../bundle-file.ts';
import type { Archive } from '../desk/archive.ts';
import { TrainError } from '../errors.ts';
import type { History } from '../history/history.ts';
import { type FitOptions, type FitResult, fit } from '../pipeline.ts';
import { type Absorbed, absorb } from './absorb.ts';
import { type Comparison, compare } from './compare.ts';

/** What a refit works on. */
export interface RefitInput {
  readonly archive: Archive;
  /** Files of the first fit, read; null where the archive stands alone. */
  readonly files: History | null;
  readonly site: Site;
  readonly previous: OpenDocument | null;
  /** Ticks fromTick <= n < toTick of archive and files are used. */
  readonly fromTick?: number;
  readonly toTick?: number;
}

/** A candidate, and what it came from. */
export interface RefitResult {
  readonly absorbed: Absorbed;
  readonly fit: FitResult;
  /** null without a previous bundle. */
  readonly comparison: Comparison | null;
}

/** Shares as FitOptions; null: chosen so that the newest readings calibrate and judge, and most of them are learned. */
export interface RefitOptions extends Omit<FitOptions, 'learnShare' | 'calibrateShare'> {
  readonly learnShare: number | null;
  readonly calibrateShare: number | null;
}

/** Shares of a first fit, and the most that a part takes of the whole. */
const CALIBRATE = 0.2;
const JUDGE = 0.2;

/**
 * Refits.
 *
 * throws  TrainError 'archive', 'history', 'bundle' or 'options' in one sentence
 */
export async function refit(input: RefitInput, options: RefitOptions): Promise<RefitResult> {
  const { site, previous } = input;
  const difference = previous === null ? null : describeSchemaDifference(previous.bundle, site);
  if (difference !== null) {
    throw new TrainError('bundle', `--previous was made for other readings than the site file declares: ${difference}`);
  }
  const absorbed = absorb(cut(input.archive, input), input.files, site);
  const shares = sharesFor(absorbed, site.horizon);
  const result = await fit(
    {
      series: absorbed.series,
      site,
      survey: absorbed.survey,
      lattices: absorbed.lattices,
      previous: previous?.document ?? null,
    },
    {
      ...options,
      learnShare: options.learnShare ?? shares.learnShare,
      calibrateShare: options.calibrateShare ?? shares.calibrateShare,
    },
  );
  const comparison = previous === null ? null : compare(result, previous, absorbed.series);
  return { absorbed, fit: result, comparison };
}

/** The archive between two ticks. */
function cut(archive: Archive, span: Pick<RefitInput, 'fromTick' | 'toTick'>): Archive {
  const { fromTick = Number.NEGATIVE_INFINITY, toTick = Number.POSITIVE_INFINITY } = span;
  const from = archive.ticks.findIndex((tick) => tick >= fromTick);
  const end = archive.ticks.findLastIndex((tick) => tick < toTick) + 1;
  if (from < 0 || end <= from) {
    throw new TrainError('archive', `archive of ${archive.site}: no readings in the time asked for (--from, --until)`);
  }
  const channels = archive.channels.map((channel) => ({
    ...channel,
    values: channel.values.slice(from, end),
    original: channel.original.slice(from, end),
  }));
  return { ...archive, ticks: archive.ticks.slice(from, end), channels };
}

/**
 * With files before it, a short archive would fall into the judged part whole and teach nothing. So its last quarter
 * judges, the quarter before calibrates, and the rest is learned from, within what each part needs at least.
 */
function sharesFor({ series, newFromTick }: Absorbed, horizon: number) {
  const fresh = series.firstTick + series.ticks - newFromTick;
  const share = (most: number): number => {
    const least = Math.min(most, (8 * horizon + 64) / series.ticks);
    return Math.max(least, Math.min(most, fresh / 4 / series.ticks));
  };
  if (fresh >= series.ticks) return { learnShare: 1 - CALIBRATE - JUDGE, calibrateShare: CALIBRATE };
  const calibrateShare = share(CALIBRATE);
  return { learnShare: 1 - calibrateShare - share(JUDGE), calibrateShare };
}
