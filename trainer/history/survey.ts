/**
 * What is wrong with a history, in plain sentences.
 */
import type { Site } from '@stillwell/protocol';
import type { History } from './history.ts';
import type { Series } from './series.ts';

export interface Survey {
  readonly site: string;
  readonly ticks: number;
}

/** Looks a history over. */
export function surveyHistory(_history: History, series: Series, site: Site): Survey {
  return Object.freeze({ site: site.site, ticks: series.ticks });
}
