/**
 * What every kind of model gives when it is tried on a history: a model before calibration, without and with rounding, and
 * its sections of the bundle document. The pipeline calibrates, compares and judges all kinds alike.
 */
import type { Bundle, Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { FitOptions } from '../fit-options.ts';
import type { Series } from '../history/series.ts';
import type { Prepared } from '../identify/prepare.ts';
import type { Taught } from '../identify/teach.ts';
import type { Calibration, Surroundings } from '../quantise/float-model.ts';
import type { Split } from '../requirements.ts';

/** Parts of a bundle document that belong to the kind alone. */
export type KindSections = Pick<Bundle, 'kind' | 'linear' | 'round' | 'dense' | 'features' | 'switched' | 'driven'>;

/** What a kind is tried on. */
export interface Attempt {
  readonly series: Series;
  readonly site: Site;
  readonly options: FitOptions;
  readonly split: Split;
  readonly prepared: Prepared;
  /** Bank, penalties and map of the linear kind, for kinds that build on it. */
  readonly taught: Taught;
  /** Scalings, lattices, season and the bank, for `floatModel`. */
  readonly around: Surroundings;
  /** Bytes of the document still free with these sections, calibration and judge's table included; negative: too many. */
  bytesLeft(sections: KindSections): number;
}

/** A model of one kind, learned, not yet calibrated. */
export interface Candidate {
  readonly kind: Model['kind'];
  /** For people: what it is made of. */
  readonly name: string;
  /** Without rounding; its guard open, its bounds of no width. */
  readonly float: Model;
  /** As the bundle will hold it; guard and bounds likewise. */
  readonly rounded: Model;
  readonly sections: KindSections;
  /** What was settled on, for the provenance. */
  readonly settled: Readonly<Record<string, unknown>>;
  /** Learned once more from the first `ticks` ticks, at the same size and with the same choices. */
  again(ticks: number): Candidate;
}

/** Tries a kind; null, and quickly, where it does not apply to the history. */
export type TryKind = (attempt: Attempt) => Candidate | null;

/**
 * A model with its guard and bounds set.
 *
 * shapes  calibration of the model's channels, signals and horizon
 * units   standardised
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function withCalibration<M extends Model>(model: M, calibration: Calibration): M {
  return { ...model, ...calibration };
}
