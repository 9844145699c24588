import type { Model } from '@stillwell/runtime/filter';

/** What a record is coded against: a bundle at work, or each channel's last value where there is none. */
export interface Recorded {
  /** Last tick folded in; -1 before the first. */
  readonly tick: number;
  readonly channelCount: number;
  readonly signalCount: number;
  /** Digest of the bundle document; 32 noughts without a bundle. */
  readonly digest: Uint8Array;
  /** (nc) the tick's readings as lattice indices, NaN missing or off the lattice. */
  readonly lattice: Float64Array;
  /** (nc) what was forecast of them, in lattice steps. */
  readonly predicted: Float64Array;
  /** (nc) readings off the lattice, NaN for none; null where all are rounded to it. */
  readonly raw: Float64Array | null;
  /** Null without a bundle: such a record is never made coarser, since nobody knows what its readings are worth. */
  readonly model: Model | null;
  /** From the next tick on readings lie on every 2^k-th step (nc); at a segment's boundary alone. Nothing without a bundle. */
  coarsen(coarseness: Uint8Array): void;
  /** Lattice index of a late reading. */
  indexOf(channel: number, value: number): number;
  /** (nc) expected size of a residual in lattice steps, NaN where unknown. */
  residualScaleSteps(): Float64Array;
  savedState(): Uint8Array;
  savedBounds(): Uint8Array;
}
