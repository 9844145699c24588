/**
 * From a history to a candidate bundle, the steps in order: split by time, clean, learn, shrink, round, calibrate, judge.
 * The same series, site, options and seed give the same bytes; nothing here reads a clock into the document.
 */
import type { Bundle, Site } from '@stillwell/protocol';
import type { LinearModel } from '@stillwell/runtime/filter';
import type { Series } from './history/series.ts';
import type { Verdicts } from './judge/gate.ts';
import type { Hindcast } from './judge/hindcast.ts';
import type { Audit } from './quantise/audit.ts';

export interface FitOptions {
  readonly seed: number;
  /** Share of the ticks, from the start, that the model learns from; in (0, 1). */
  readonly learnShare: number;
  /** Share right after it that chooses penalties and sets the bounds; what remains judges. */
  readonly calibrateShare: number;
  /** Largest bundle document in bytes. */
  readonly maxBytes: number;
  /** Nominal coverage of the bounds, in (0, 1). */
  readonly coverage: number;
  /** After judging, learn once more from every tick with the penalties already chosen. */
  readonly useAll: boolean;
  /** Why a person wants it sealed without skill; null otherwise. Stands in the bundle. */
  readonly override: string | null;
  readonly progress: (step: string) => void;
}

export const FIT_DEFAULTS: FitOptions = Object.freeze({
  seed: 1,
  learnShare: 0.6,
  calibrateShare: 0.2,
  maxBytes: 24 * 1024,
  coverage: 0.9,
  useAll: false,
  override: null,
  progress: () => {},
});

export interface FitInput {
  readonly series: Series;
  readonly site: Site;
  /** The survey as saved; its digest goes into the provenance. */
  readonly survey: unknown;
  /** Per channel: readings are offset + k × step. */
  readonly lattices: readonly { readonly step: number; readonly offset: number }[];
  /** Document the new one is refitted from; its digest goes into the provenance. */
  readonly previous?: Uint8Array | null;
}

/** Ticks fromTick <= n < toTick, absolute since 1970. */
export interface TickSpan {
  readonly fromTick: number;
  readonly toTick: number;
}

/** What the learning settled on. */
export interface Chosen {
  /** Ridge penalty of each signal's own stage, relative to features of unit variance. */
  readonly ownPenalty: readonly number[];
  /** Ridge penalty of the stage across signals; null: that stage did not pay. */
  readonly crossPenalty: number | null;
  /** Name of the feature bank, and what it holds. */
  readonly bank: string;
  readonly featureCount: number;
  readonly periodTicks: number;
  readonly order: number;
  readonly basisCount: number;
  readonly folds: number;
}

export interface FitResult {
  /** The bundle document, ready to be written as a candidate. */
  readonly document: Uint8Array;
  readonly bundle: Bundle;
  /** The model as the gateway will compute it, read back from the document. */
  readonly model: LinearModel;
  readonly learn: TickSpan;
  readonly calibrate: TickSpan;
  readonly judged: TickSpan;
  /** The rounded model on the judged part. */
  readonly hindcast: Hindcast;
  readonly audit: Audit;
  readonly verdicts: Verdicts;
  readonly chosen: Chosen;
  readonly warnings: readonly string[];
  /** Wall time of the steps in ms, for the terminal; not in the document. */
  readonly timings: Readonly<Record<string, number>>;
}
