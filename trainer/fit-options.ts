/**
 * What a fit is asked: the options with their defaults, and the history it works on.
 */
import type { Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from './history/series.ts';
import type { Earlier } from './identify/earlier.ts';

/** Options of a fit. */
export interface FitOptions {
  readonly seed: number;
  /** Share of the ticks, from the start, that the model learns from; in (0, 1). */
  readonly learnShare: number;
  /** Share right after it that chooses penalties and sets the bounds; what remains judges. */
  readonly calibrateShare: number;
  /** Largest bundle in bytes, sealed with as many signatures as an envelope holds. */
  readonly maxBytes: number;
  /** Nominal coverage of the bounds, in (0, 1). */
  readonly coverage: number;
  /** After judging, learn once more from every tick with the penalties already chosen. */
  readonly useAll: boolean;
  /** Kind of model; `auto`: the judge's choice among all that apply. */
  readonly kind: Model['kind'] | 'auto';
  /** Why a person wants it sealed without skill; null otherwise. Stands in the bundle. */
  readonly override: string | null;
  readonly progress: (step: string) => void;
}

/** The defaults, which the command line uses too. */
export const FIT_DEFAULTS: FitOptions = Object.freeze({
  seed: 1,
  learnShare: 0.6,
  calibrateShare: 0.2,
  maxBytes: 24 * 1024,
  coverage: 0.9,
  useAll: false,
  kind: 'auto',
  override: null,
  progress: () => {},
});

/** What is fitted. */
export interface FitInput {
  readonly series: Series;
  readonly site: Site;
  /** The survey as saved; its digest goes into the provenance. */
  readonly survey: unknown;
  /** Per channel: readings are offset + k × step. */
  readonly lattices: readonly { readonly step: number; readonly offset: number }[];
  /** Document the new one is refitted from; its digest goes into the provenance. */
  readonly previous?: Uint8Array | null;
  /** What is known of the time before the series; the linear kind learns from it as well. */
  readonly earlier?: Earlier | null;
  /** In its place: the same, still being worked out beside. */
  readonly earlierToCome?: Promise<Earlier | null>;
}
