/**
 * A history from files to ticks, surveyed: the one door for every command that learns from or scores on history.
 */
import type { Site } from '@stillwell/protocol';
import { believe } from '../exclusions.ts';
import type { History } from './history.ts';
import { type ReadOptions, readHistory } from './read.ts';
import { type FoundLattice, findLattices } from './resolution.ts';
import type { Series } from './series.ts';
import { type Survey, surveyHistory } from './survey.ts';
import { layOnTicks } from './ticks.ts';

/** A history ready to learn from. */
export interface LoadedHistory {
  readonly history: History;
  readonly series: Series;
  readonly survey: Survey;
  readonly lattices: readonly FoundLattice[];
}

/**
 * Lays a history on ticks, excluded time told apart, and surveys it as it came; throws TrainError 'history' as layOnTicks
 * does.
 */
export function prepare(history: History, site: Site): LoadedHistory {
  const { seen, taught, mark } = believe(history, site);
  const lattices = findLattices(taught, site);
  const laid = layOnTicks(history, site, lattices);
  const series = mark(seen === history ? laid : layOnTicks(seen, site, lattices));
  return { history, series, lattices, survey: surveyHistory(history, laid, site, lattices) };
}

/**
 * Reads, lays on ticks and surveys.
 *
 * throws  TrainError 'file' or 'history' as readHistory and layOnTicks do
 */
export async function loadHistory(files: readonly string[], site: Site, options: ReadOptions): Promise<LoadedHistory> {
  return prepare(await readHistory(files, site, options), site);
}
