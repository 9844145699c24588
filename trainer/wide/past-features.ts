/**
 * What a window of projected frames is to the state: the window itself, and beside it, where asked for, random features of
 * it, centred and scaled so that both weigh alike.
 */
import type { FeatureMap } from './feature-map.ts';
import type { JointLayout } from './predictive-state.ts';
import { createFeatures } from './structured-features.ts';

/** What the features beside the window are made from. */
export interface LiftShape {
  readonly features: number;
  readonly width: number;
  readonly seed: number;
  readonly mean: Float64Array;
  readonly scale: number;
}

/** The map behind a lift; null where there are no features. */
export function featuresOf(inputs: number, lift: Pick<LiftShape, 'features' | 'width' | 'seed'>): FeatureMap | null {
  if (lift.features === 0) return null;
  return createFeatures({ inputs, outputs: lift.features, width: lift.width, seed: lift.seed });
}

/** Past features of windows of (window × numbers). */
export class PastFeatures {
  readonly length: number;
  readonly #windowLength: number;
  readonly #map: FeatureMap | null;
  readonly #lift: LiftShape;
  readonly #raw: Float32Array;

  constructor(window: number, numbers: number, lift: LiftShape) {
    this.#windowLength = window * numbers;
    this.#map = featuresOf(this.#windowLength, lift);
    this.#lift = lift;
    this.#raw = new Float32Array(lift.features);
    this.length = this.#windowLength + lift.features;
  }

  /** True where the past is the window and nothing else. */
  get isPlain(): boolean {
    return this.#map === null;
  }

  /** The features of the window that begins at `at` of `frames`; `out` (length). */
  write(frames: Float64Array, at: number, out: Float64Array): void {
    const window = frames.subarray(at, at + this.#windowLength);
    out.set(window);
    if (this.#map === null) return;
    this.#map.apply(window, this.#raw);
    const { mean, scale } = this.#lift;
    for (let k = 0; k < this.#raw.length; k++) out[this.#windowLength + k] = scale * (this.#raw[k] - mean[k]);
  }
}

/**
 * Joint rows [past at t | past at t + 1 | future]. A plain window and its future lie behind one another already, and the next
 * window is the same numbers one frame on: nothing is copied then.
 */
export class JointRows {
  readonly columns: number;
  readonly layout: JointLayout;
  readonly #past: PastFeatures;
  readonly #row: Float64Array;
  readonly #numbers: number;
  readonly #window: number;
  #last = Number.NaN;

  constructor(past: PastFeatures, window: number, horizon: number, numbers: number) {
    this.#past = past;
    this.#numbers = numbers;
    this.#window = window;
    const p = past.length;
    const next = past.isPlain ? numbers : p;
    const future = past.isPlain ? p : 2 * p;
    this.columns = future + horizon * numbers;
    this.layout = {
      past: { from: 0, to: p },
      next: { from: next, to: next + p },
      future: { from: future, to: this.columns },
      outputs: numbers,
    };
    this.#row = new Float64Array(past.isPlain ? 0 : this.columns);
  }

  /** The row of a run of (window + horizon) frames whose first is `first`. */
  of(frames: Float64Array, first: number): Float64Array {
    if (this.#past.isPlain) return frames;
    const p = this.#past.length;
    if (first === this.#last + 1) this.#row.copyWithin(0, p, 2 * p);
    else this.#past.write(frames, 0, this.#row.subarray(0, p));
    this.#past.write(frames, this.#numbers, this.#row.subarray(p, 2 * p));
    this.#row.set(frames.subarray(this.#window * this.#numbers), 2 * p);
    this.#last = first;
    return this.#row;
  }
}
