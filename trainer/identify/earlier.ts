/**
 * What is known of the time before a history: no readings any more, but the moments of any bank over them. Learning adds
 * them to its own; folds judge on the history what the time before it taught.
 */
import type { Round } from '@stillwell/runtime/filter';
import type { Bank } from './bank.ts';
import type { Moments } from './moments.ts';
import type { Scaling } from './scaling.ts';

/** Moments wanted of the time before. */
export interface EarlierWish {
  readonly bank: Bank;
  readonly horizon: number;
  /** (nc): the readings are standardised as the history's are. */
  readonly scalings: readonly Scaling[];
  readonly signalCount: number;
  /** Taken away first, as from the history; null: nothing. */
  readonly round: Round | null;
}

/** The time before a history. */
export interface Earlier {
  /** Ticks fromTick <= n < toTick since 1970. */
  readonly fromTick: number;
  readonly toTick: number;
  /** Ticks taken in between them. */
  readonly ticks: number;
  /** Digest of what is known of it, 32 bytes, for provenance. */
  readonly digest: Uint8Array;
  /** Longest round that can be taken away, ticks. */
  readonly longestRound: number;
  /** Sums over its origins; null where it has none for this horizon. */
  moments(wish: EarlierWish): Moments | null;
}

/** The same with all but the bank settled. */
export interface EarlierMoments {
  readonly ticks: number;
  of(bank: Bank): Moments | null;
}
