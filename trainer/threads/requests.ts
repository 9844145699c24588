/** What the main thread of a fit may ask of its second thread, and what comes back: plain values that travel as they are. */
import type { Bundle, Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { Factors } from '../factors/factors.ts';
import type { Series } from '../history/series.ts';
import type { LearnedCrossing } from '../judge/crossing-table.ts';
import type { Hindcast, HindcastSpan } from '../judge/hindcast.ts';
import type { Reliance } from '../judge/reliance.ts';
import type { Standing } from '../judge/replay.ts';
import type { Settled } from '../judge/settle.ts';
import type { Audit } from '../quantise/audit.ts';
import type { Calibration } from '../quantise/float-model.ts';
import type { TickSpan } from '../span.ts';

/**
 * By name: what goes with it, and the answer. Asked in this order: later ones use what earlier ones left. The thread of a
 * long fit's factors ends before the one for judging begins, that of a short one goes on; the last request is 'end'.
 */
export interface Requests {
  /** Factors of a site from nothing, or on from others; those begun before are forgotten. */
  begin: {
    given: { readonly site: Site; readonly halfLifeTicks: number | null; readonly start: Factors | null };
    got: null;
  };
  /** A chunk of what is older. */
  take: { given: Series; got: null };
  /** All that is in, to go on from. */
  snapshot: { given: null; got: Uint8Array };
  restore: { given: Uint8Array; got: null };
  /** What is in as a file has it; null where nothing is. */
  earlier: { given: null; got: Uint8Array | null };
  /** The window, which goes in last: the finished file; null where the site goes without. */
  close: { given: Series; got: Uint8Array | null };
  /** Loads what follows needs. */
  judging: { given: null; got: null };
  /** Bounds and spike guard of a model from the calibration part; the span in indices. */
  bounds: {
    given: { readonly model: Model; readonly series: Series; readonly span: TickSpan; readonly wanted: Settled };
    got: Bounded;
  };
  /** What that model, so bounded, says of limits with. */
  crossings: { given: null; got: LearnedCrossing };
  /** Of the judged part, in indices. */
  check: {
    given: { readonly bundle: Bundle; readonly float: Model; readonly series: Series; readonly judged: TickSpan };
    got: Checks;
  };
  /** Forecasts of another model over the judged part. */
  cast: {
    given: {
      readonly model: Model;
      readonly series: Series;
      readonly span: HindcastSpan;
      readonly units: readonly string[];
    };
    got: Cast;
  };
  /** Nothing follows. */
  end: { given: null; got: null };
}

/** What the calibration part gives a model first. */
export interface Bounded {
  readonly guarded: Calibration;
  /** The model warmed up on what lies before that part; null where it is short. */
  readonly standing: Standing | null;
}

/** Of a hindcast, what two models are compared by. */
export type Cast = Pick<Hindcast, 'horizon' | 'mse' | 'coverage'>;

/** What is found of a chosen model beside its hindcast. */
export interface Checks {
  readonly audit: Audit;
  readonly reliance: Reliance | null;
}

/** One request under way. */
export interface Asked {
  readonly id: number;
  readonly what: keyof Requests;
  readonly given: unknown;
}

/** Its answer, or why there is none. */
export type Answered =
  | { readonly id: number; readonly got: unknown }
  | { readonly id: number; readonly problem: Problem };

/** An error as it travels: a class would not survive. */
export interface Problem {
  readonly name: string;
  readonly message: string;
  readonly stack: string | undefined;
  /** Of a TrainError; null for others, which are mistakes of ours. */
  readonly code: string | null;
  readonly details: Readonly<Record<string, unknown>>;
}
