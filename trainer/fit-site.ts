/**
 * One site from its history to the files of its folder: read, learn, judge. What `stillwell fit` does for one site, and a
 * worker of a fleet for each of its own. Writing is left to the caller: of a fleet, only the main thread writes, so that no
 * worker can be stopped halfway through it.
 */
import { statSync } from 'node:fs';
import { join } from 'node:path';
import type { Site } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import { candidateFiles } from './candidate-files.ts';
import { FACTORS_FILE, FactorsKeeper, factorsNotes, isAffordable } from './factors/keeper.ts';
import type { FitOptions } from './fit-options.ts';
import { findFiles } from './history/find-files.ts';
import { type LongHistory, loadLong } from './history/long.ts';
import type { OlderSink } from './history/older.ts';
import { type FitResult, fit } from './pipeline.ts';
import type { Progress } from './progress.ts';
import { FactorsBeside } from './threads/factors-beside.ts';
import { JudgingBeside } from './threads/judging-beside.ts';
import { hasSecondCore, paysSecondThread, SecondThread } from './threads/second-thread.ts';
import type { TimeSpan } from './time-option.ts';

/** Bytes of the smallest files, columnar ones, that hold a long history of a few signals. */
const LARGE_BYTES = 1 << 20;

/** What is fitted, from where, to where. */
export interface FitSiteJob {
  readonly site: Site;
  readonly history: readonly string[];
  /** Folder for the candidate and what stands beside it. */
  readonly out: string;
  /** Zone of history times that carry none; null: the site's. */
  readonly zone: string | null;
  readonly span: TimeSpan;
  /** Ticks after which a reading counts half in the factors; null: all count alike. */
  readonly halfLifeTicks: number | null;
  /** File that keeps the place where reading was interrupted; absent: reading begins anew. */
  readonly resumeFile?: string;
  /** Told in a sentence when reading goes on from there, or why it cannot. */
  readonly say?: (sentence: string) => void;
  /** 1: nothing is done on a second thread; absent: as the machine has cores, and never where this is a worker itself. */
  readonly threads?: 1 | 2;
  readonly options: Omit<FitOptions, 'progress'>;
}

/** Who is told how far it is. */
export interface FitSiteWatch {
  readonly reading: Progress;
  /** A step of the fit begins. */
  step(name: string): void;
  /** The fit is over, whatever came of it. */
  end(): void;
}

/** What came of it. */
export interface FittedSite {
  readonly loaded: LongHistory;
  readonly result: FitResult;
  /** All that is to be written, made whole; for writeOutputs. */
  readonly files: readonly NewFile[];
  /** For people. */
  readonly notes: readonly string[];
}

/**
 * Fits one site; nothing is written.
 *
 * throws  TrainError as loadLong and fit do
 */
export async function fitSite(job: FitSiteJob, watch: FitSiteWatch): Promise<FittedSite> {
  const { site, halfLifeTicks, threads } = job;
  const mayHaveSecond = threads === undefined ? hasSecondCore() : threads > 1;
  // Begun before it is known whether the history is long, where the files are large: so it is up when the first chunk comes.
  let second = mayHaveSecond && isLarge(job) ? new SecondThread() : null;
  let keeper: FactorsKeeper | FactorsBeside = new FactorsKeeper(site, halfLifeTicks);
  const begun = (): OlderSink => {
    if (mayHaveSecond) second ??= new SecondThread();
    keeper = second === null ? new FactorsKeeper(site, halfLifeTicks) : new FactorsBeside(second, site, halfLifeTicks);
    return keeper.sink();
  };
  try {
    const loaded = await load(job, watch.reading, begun);
    if (loaded.older === null) {
      if (mayHaveSecond && paysSecondThread(loaded.series.ticks * loaded.series.values.length)) begun();
      else await second?.end();
    }
    return await fitLoaded(job, watch, loaded, keeper, second);
  } finally {
    await second?.end();
  }
}

async function fitLoaded(
  { site, options, out }: FitSiteJob,
  watch: FitSiteWatch,
  loaded: LongHistory,
  keeper: FactorsKeeper | FactorsBeside,
  second: SecondThread | null,
): Promise<FittedSite> {
  const { series, survey, lattices, older } = loaded;
  const hasEarlier = older !== null && isAffordable(site);
  const earlier = hasEarlier ? { earlierToCome: Promise.resolve(keeper.earlier()) } : {};
  const closing = keeper instanceof FactorsBeside ? keeper.close(series, older === null) : null;
  const judging = closing && new JudgingBeside(older === null && second !== null ? second : closing);
  const result = await fit(
    { series, site, survey, lattices, ...earlier },
    { ...options, progress: (name) => watch.step(name) },
    judging,
  ).finally(() => {
    watch.end();
    return judging?.end();
  });
  const candidate = await candidateFiles(out, site, survey, result);
  const factors = await (closing ?? keeper.close(series));
  const files = [...candidate, ...(factors === null ? [] : [{ path: join(out, FACTORS_FILE), bytes: factors }])];
  return { loaded, result, files, notes: factorsNotes(site, older !== null) };
}

/** Whether the files may well hold a long history. What cannot be found is refused by the reader, in its own words. */
function isLarge({ history, site }: FitSiteJob): boolean {
  try {
    return findFiles(history, site.site).reduce((sum, path) => sum + statSync(path).size, 0) >= LARGE_BYTES;
  } catch {
    return false;
  }
}

async function load(
  { site, history, zone, span, options, resumeFile, say, halfLifeTicks }: FitSiteJob,
  progress: Progress,
  sinkFor: () => OlderSink,
): Promise<LongHistory> {
  const judgedShare = 1 - options.learnShare - options.calibrateShare;
  const place =
    resumeFile === undefined ? {} : { resumeFile, sinkKey: `half-life ${halfLifeTicks}`, say: say ?? (() => {}) };
  try {
    return await loadLong(history, site, { zone, ...span, ...place, progress }, sinkFor, judgedShare);
  } finally {
    progress.end();
  }
}
