/**
 * One site from its history to the files of its folder: read, learn, judge. What `stillwell fit` does for one site, and a
 * worker of a fleet for each of its own. Writing is left to the caller: of a fleet, only the main thread writes, so that no
 * worker can be stopped halfway through it.
 */
import type { Site } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import { candidateFiles } from './candidate-files.ts';
import type { FitOptions } from './fit-options.ts';
import { type LoadedHistory, loadHistory } from './history/load.ts';
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
  readonly loaded: LoadedHistory;
  readonly result: FitResult;
  /** All that is to be written, made whole; for writeOutputs. */
  readonly files: readonly NewFile[];
}

/**
 * Fits one site; nothing is written.
 *
 * throws  TrainError as loadHistory and fit do
 */
export async function fitSite(job: FitSiteJob, watch: FitSiteWatch): Promise<FittedSite> {
  const { site, options } = job;
  const loaded = await load(job, watch.reading);
  const { series, survey, lattices } = loaded;
  const result = await fit(
    { series, site, survey, lattices },
    { ...options, progress: (name) => watch.step(name) },
  ).finally(() => watch.end());
  return { loaded, result, files: await candidateFiles(job.out, site, survey, result) };
}

async function load({ site, history, zone, span, options }: FitSiteJob, progress: Progress): Promise<LoadedHistory> {
  const judgedShare = 1 - options.learnShare - options.calibrateShare;
  try {
    return await loadHistory(history, site, { zone, ...span, progress }, judgedShare);
  } finally {
    progress.end();
  }
}
