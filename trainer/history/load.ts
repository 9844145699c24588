/**
 * A history from files to ticks, surveyed: the one door for every command that learns from or scores on history.
 */
import type { Site } from '@stillwell/protocol';
import { believe, type Remembered } from '../exclusions.ts';
import type { History } from './history.ts';
import { plausibilityOf } from './plausible.ts';
import { type ReadOptions, readHistory } from './read.ts';
import { type FoundLattice, findLattices } from './resolution.ts';
import type { Series } from './series.ts';
import { type Survey, surveyHistory } from './survey.ts';
import { layOnTicks, tickSpan } from './ticks.ts';

/** A history ready to learn from. */
export interface LoadedHistory {
  readonly history: History;
  readonly series: Series;
  readonly survey: Survey;
  readonly lattices: readonly FoundLattice[];
}

/**
 * Lays a history on ticks, excluded time told apart, and surveys it as it came. Lattices come from all readings, judged
 * ones too: a sensor's step is no knowledge of the future, and every reading must be given back exactly.
 *
 * judgedShare  share of the ticks at the end that will judge, and so say nothing of which readings are plausible
 * remembered   what readings before this history say of the time that must not teach
 * throws       TrainError 'history' as layOnTicks does
 */
export function prepare(
  history: History,
  site: Site,
  judgedShare = 0,
  remembered: readonly Remembered[] = [],
): LoadedHistory {
  const { seen, taught, mark } = believe(history, site, remembered);
  const lattices = findLattices(taught, site);
  const plausibility = plausibilityOf(taught, site, judgedFromMs(history, site.tickMs, judgedShare));
  const laid = layOnTicks(history, site, lattices, plausibility);
  const series = mark(seen === history ? laid : layOnTicks(seen, site, lattices, plausibility));
  return { history, series, lattices, survey: surveyHistory(history, laid, site, lattices, series) };
}

function judgedFromMs(history: History, tickMs: number, share: number): number {
  const span = share > 0 ? tickSpan(history.channels, tickMs) : null;
  if (span === null) return Number.POSITIVE_INFINITY;
  return (span.first + Math.round((1 - share) * (span.last - span.first + 1))) * tickMs;
}

/**
 * Reads, lays on ticks and surveys.
 *
 * judgedShare  as `prepare`
 * throws  TrainError 'file' or 'history' as readHistory and layOnTicks do
 */
export async function loadHistory(
  files: readonly string[],
  site: Site,
  options: ReadOptions,
  judgedShare = 0,
): Promise<LoadedHistory> {
  return prepare(await readHistory(files, site, options), site, judgedShare);
}
