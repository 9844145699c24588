/**
 * From what the desk collected to a new candidate: archive and files become one series, the fit is the same as the first
 * one, and the candidate is held against the bundle that serves.
 */
import { describeSchemaDifference, type Site } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import type { OpenDocument } from '../bundle-file.ts';
import type { Archive } from '../desk/archive.ts';
import { TrainError } from '../errors.ts';
import type { Factors } from '../factors/factors.ts';
import { FactorsKeeper } from '../factors/keeper.ts';
import type { History } from '../history/history.ts';
import { LONG_FROM, RECENT_TICKS } from '../history/long-limits.ts';
import type { Series } from '../history/series.ts';
import { sliceSeries } from '../history/slice-series.ts';
import { type FitOptions, type FitResult, fit } from '../pipeline.ts';
import { FactorsBeside } from '../threads/factors-beside.ts';
import { JudgingBeside } from '../threads/judging-beside.ts';
import { hasSecondCore, paysSecondThread, SecondThread } from '../threads/second-thread.ts';
import { type Absorbed, absorb } from './absorb.ts';
import { type Comparison, compare } from './compare.ts';

/** What a refit works on. */
export interface RefitInput {
  readonly archive: Archive;
  /** Files of the first fit, read; null where the archive stands alone. */
  readonly files: History | null;
  /** What is known of the time before, in place of files; null: nothing. Only what is newer is taken from the archive. */
  readonly factors: Factors | null;
  /** Ticks after which a reading counts half in factors made anew; those given keep their own. */
  readonly halfLifeTicks: number | null;
  readonly site: Site;
  readonly previous: OpenDocument | null;
  /** Ticks fromTick <= n < toTick of archive and files are used. */
  readonly fromTick?: number;
  readonly toTick?: number;
  /** 1: nothing is done on a second thread; absent: as the machine has cores, and never where this is a worker itself. */
  readonly threads?: 1 | 2;
}

/** A candidate, and what it came from. */
export interface RefitResult {
  readonly absorbed: Absorbed;
  readonly fit: FitResult;
  /** null without a previous bundle. */
  readonly comparison: Comparison | null;
  /** The factors of everything, for the next refit; null where the site has too many signals for them. */
  readonly factors: Uint8Array | null;
  /** What whenFitted made. */
  readonly files: readonly NewFile[];
}

/** Makes what is to be written of the fit; it is not kept waiting by what is still compared. */
export type WhenFitted = (absorbed: Absorbed, fit: FitResult) => Promise<readonly NewFile[]>;

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
export async function refit(
  input: RefitInput,
  options: RefitOptions,
  whenFitted: WhenFitted = async () => [],
): Promise<RefitResult> {
  const { site, previous, factors, halfLifeTicks } = input;
  const difference = previous === null ? null : describeSchemaDifference(previous.bundle, site);
  if (difference !== null) {
    throw new TrainError('bundle', `--previous was made for other readings than the site file declares: ${difference}`);
  }
  const archive = cut(input.archive, newerThan(input));
  // Up, with the factors in it, when archive and files are joined.
  const second = wantsSecond(input, archive) ? new SecondThread() : null;
  try {
    const keeper =
      second === null
        ? new FactorsKeeper(site, halfLifeTicks, factors)
        : new FactorsBeside(second, site, halfLifeTicks, factors);
    const judging = second && new JudgingBeside(second, previous !== null);
    return await refitWith(keeper, judging, absorb(archive, input.files, site), input, options, whenFitted);
  } finally {
    await second?.end();
  }
}

async function refitWith(
  keeper: FactorsKeeper | FactorsBeside,
  judging: JudgingBeside | null,
  absorbed: Absorbed,
  { site, previous, factors }: RefitInput,
  options: RefitOptions,
  whenFitted: WhenFitted,
): Promise<RefitResult> {
  const { older, window } = cutLong(absorbed.series);
  if (older !== null) await keeper.sink().take(older);
  const shares = sharesFor({ series: window, newFromTick: absorbed.newFromTick }, site.horizon);
  const learnShare = options.learnShare ?? shares.learnShare;
  const calibrateShare = options.calibrateShare ?? shares.calibrateShare;
  const hasEarlier = older !== null || factors !== null;
  const earlier = hasEarlier ? { earlierToCome: Promise.resolve(keeper.earlier()) } : {};
  const closing = keeper instanceof FactorsBeside ? keeper.close(window, true) : null;
  const { survey, lattices } = absorbed;
  const result = await fit(
    { series: window, ...earlier, site, survey, lattices, previous: previous?.document ?? null },
    { ...options, learnShare, calibrateShare },
    judging,
  );
  const comparing = previous && compare(result, previous, window, judging);
  // Where making the files fails, nobody waits for it.
  comparing?.catch(() => {});
  const files = await whenFitted(absorbed, result);
  const bytes = await (closing ?? keeper.close(window));
  return { absorbed, fit: result, comparison: await comparing, factors: bytes, files };
}

function wantsSecond({ threads, factors }: RefitInput, { ticks, channels }: Archive): boolean {
  const mayHaveSecond = threads === undefined ? hasSecondCore() : threads > 1;
  return mayHaveSecond && paysSecondThread(ticks.length * channels.length + (factors?.sums.lagged.length ?? 0));
}

/** What is asked for, and of that only what the factors have not taken in. */
function newerThan({ factors, fromTick, toTick }: RefitInput): Pick<RefitInput, 'fromTick' | 'toTick'> {
  const known = factors?.toTick ?? Number.NEGATIVE_INFINITY;
  return {
    fromTick: Math.max(known, fromTick ?? Number.NEGATIVE_INFINITY),
    ...(toTick === undefined ? {} : { toTick }),
  };
}

/** The newest part of a long series, and what is older; all of a short one. */
function cutLong(series: Series): { readonly older: Series | null; readonly window: Series } {
  if (series.ticks <= LONG_FROM) return { older: null, window: series };
  const at = series.ticks - RECENT_TICKS;
  return { older: sliceSeries(series, 0, at), window: sliceSeries(series, at, series.ticks) };
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
function sharesFor({ series, newFromTick }: Pick<Absorbed, 'series' | 'newFromTick'>, horizon: number) {
  const fresh = series.firstTick + series.ticks - Math.max(newFromTick, series.firstTick);
  const share = (most: number): number => {
    const least = Math.min(most, (8 * horizon + 64) / series.ticks);
    return Math.max(least, Math.min(most, fresh / 4 / series.ticks));
  };
  if (fresh >= series.ticks) return { learnShare: 1 - CALIBRATE - JUDGE, calibrateShare: CALIBRATE };
  const calibrateShare = share(CALIBRATE);
  return { learnShare: 1 - calibrateShare - share(JUDGE), calibrateShare };
}
