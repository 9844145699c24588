/**
 * The projection of a window of frames, put together from those of its frames: each frame is projected once, when it comes,
 * and a window costs what its own few numbers cost. Either side by side, where a later step wants the frames apart, or added
 * up under random signs and shifts, one set for each place in the window, so that the sum is itself a projection of the window.
 */
import type { FeatureMap } from './feature-map.ts';
import { openRandom } from './random.ts';

/** How frames are put together. */
export type WindowForm = 'beside' | 'summed';

/** What a window is made of. */
export interface WindowShape {
  readonly projection: FeatureMap;
  /** Frames in a window. */
  readonly frames: number;
  readonly form: WindowForm;
  readonly seed: number;
}

/**
 * A window that moves over frames.
 *
 * Distances: beside, a window's squared distance is the sum of its frames', so that what the projection keeps within a share ε
 * of every pair of frames it keeps of every pair of windows. Summed, its expectation is exact and its relative variance at
 * most twice that of one frame's projection (frames that are all alike), since signs and shifts make frames independent.
 */
export class WindowProjection {
  readonly outputs: number;
  readonly #projection: FeatureMap;
  readonly #frames: number;
  readonly #form: WindowForm;
  /** (frames × k) the newest frames' projections, in a ring. */
  readonly #ring: Float32Array;
  readonly #signs: Float32Array;
  readonly #shifts: Uint32Array;
  readonly #one: Float32Array;
  #seen = 0;

  /**
   * shapes  window (frames × projection.outputs) numbers side by side, or projection.outputs summed
   * units   as the projection's
   * throws  RangeError where there is no frame to a window
   * source  summed: the count sketch of a long vector by pieces, signs independent from piece to piece (Charikar et al. 2002)
   * cost    keeps 4 bytes × frames × k, twice that where summed
   */
  constructor({ projection, frames, form, seed }: WindowShape) {
    if (!(Number.isInteger(frames) && frames >= 1)) throw new RangeError(`frames: expected 1 or more, got ${frames}`);
    const k = projection.outputs;
    this.#projection = projection;
    this.#frames = frames;
    this.#form = form;
    this.#ring = new Float32Array(frames * k);
    this.#one = new Float32Array(k);
    const random = openRandom(seed, 1);
    this.#signs = Float32Array.from({ length: form === 'summed' ? frames * k : 0 }, () => random.sign());
    this.#shifts = Uint32Array.from({ length: frames }, () => random.below(k));
    this.outputs = form === 'summed' ? k : frames * k;
  }

  /** True once the window is full. */
  get isFull(): boolean {
    return this.#seen >= this.#frames;
  }

  /** Projects the next frame and takes it into the window. */
  push(frame: ArrayLike<number>): void {
    const k = this.#one.length;
    this.#projection.apply(frame, this.#one);
    this.#ring.set(this.#one, (this.#seen % this.#frames) * k);
    this.#seen++;
  }

  /** The newest frame's own projection; the next `push` writes over it. */
  get newest(): Float32Array {
    return this.#one;
  }

  /** Writes the window's features, the newest frame's first; what came before the first frame counts as 0. */
  write(out: Float32Array): void {
    const k = this.#one.length;
    const summed = this.#form === 'summed';
    out.fill(0, 0, this.outputs);
    for (let lag = 0; lag < this.#frames && lag < this.#seen; lag++) {
      const at = ((this.#seen - 1 - lag) % this.#frames) * k;
      if (summed) this.#add(out, lag, at);
      else out.set(this.#ring.subarray(at, at + k), lag * k);
    }
  }

  /** Adds the frame that stands at `at` in the ring, with the signs and the shift of its lag. */
  #add(out: Float32Array, lag: number, at: number): void {
    const k = this.#one.length;
    const shift = this.#shifts[lag];
    const sign = lag * k;
    for (let j = 0; j < k - shift; j++) out[j + shift] += this.#signs[sign + j] * this.#ring[at + j];
    for (let j = k - shift; j < k; j++) out[j + shift - k] += this.#signs[sign + j] * this.#ring[at + j];
  }
}
