/** What a gateway counts from its start to its end, for health and status. */
import type { PayloadReason } from '@stillwell/protocol';

/** Why a reading was refused, beside the reasons a payload gives. */
export type RefusedCause =
  | PayloadReason
  | 'below-range'
  | 'above-range'
  | 'future'
  | 'too-late'
  | 'flood'
  | 'clock-unset';

/** Counts since the start; fields are written by the engine alone. */
export class Counters {
  /** Readings taken, late ones among them. */
  readings = 0;
  /** Readings that came after their tick had closed. */
  late = 0;
  /** Late readings that changed a closed tick. */
  corrections = 0;
  duplicates = 0;
  /** Ticks folded in. */
  ticks = 0;
  /** Ticks of outages longer than can be bridged. */
  skippedTicks = 0;
  readonly #refused = new Map<string, number>();

  refuse(cause: RefusedCause): void {
    this.#refused.set(cause, (this.#refused.get(cause) ?? 0) + 1);
  }

  get refused(): Readonly<Record<string, number>> {
    return Object.fromEntries(this.#refused);
  }
}
