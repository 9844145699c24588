/**
 * One site from its history to the files of its folder: read, learn, judge. What `stillwell fit` does for one site, and a
 * worker of a fleet for each of its own. Writing is left to the caller: of a fleet, only the main thread writes, so that no
 * worker can be stopped halfway through it.
 */
import { join } from 'node:path';
import type { Site } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import { candidateFiles } from './candidate-files.ts';
import { FACTORS_FILE, FactorsKeeper } from './factors/keeper.ts';
import type { FitOptions } from './fit-options.ts';
import { type LongHistory, loadLong } from './history/long.ts';
import type { OlderSink } from './history/older.ts';
import { type FitResult, fit } from './pipeline.ts';
import type { Progress } from './progress.ts';
import type { TimeSpan } from './time-option.ts';

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
  const { site, options, out, halfLifeTicks } = job;
  let keeper = new FactorsKeeper(site, halfLifeTicks);
  const begun = (): OlderSink => {
    keeper = new FactorsKeeper(site, halfLifeTicks);
    return keeper.sink();
  };
  const loaded = await load(job, watch.reading, begun);
  const { series, survey, lattices, older } = loaded;
  const earlier = older === null ? null : keeper.earlier();
  const result = await fit(
    { series, site, survey, lattices, earlier },
    { ...options, progress: (name) => watch.step(name) },
  ).finally(() => watch.end());
  const factors = keeper.close(series);
  const files = [
    ...(await candidateFiles(out, site, survey, result)),
    ...(factors === null ? [] : [{ path: join(out, FACTORS_FILE), bytes: factors }]),
  ];
  return { loaded, result, files, notes: keeper.notes(older !== null) };
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
