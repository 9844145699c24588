/**
 * What a map of a vector into features must do, whichever way it is built: random Fourier features, whose products z(x)·z(y)
 * come near a Gaussian kernel, and random projections, whose distances come near those of the vectors themselves.
 */

/** A seeded map of a vector into features. */
export interface FeatureMap {
  readonly inputs: number;
  readonly outputs: number;
  /** Bytes the map itself keeps. */
  readonly bytes: number;
  /**
   * Writes the features of x.
   *
   * shapes  x (inputs), out (outputs)
   * units   as the map says
   * throws  nothing; a number that is not finite gives features that are not finite
   * cost    allocates nothing
   */
  apply(x: ArrayLike<number>, out: Float32Array): void;
}

/** What random Fourier features are made from. */
export interface FeatureShape {
  readonly inputs: number;
  /** Even: features come in pairs of a cosine and a sine, all cosines first. */
  readonly outputs: number;
  /** Of the Gaussian kernel exp(−|x − y|² / (2 width²)), in the units of the inputs. */
  readonly width: number;
  readonly seed: number;
}

/** Refuses a shape no map can have. */
export function checkShape({ inputs, outputs, width }: FeatureShape): void {
  if (!(Number.isInteger(inputs) && inputs >= 1)) throw new RangeError(`inputs: expected 1 or more, got ${inputs}`);
  if (!(Number.isInteger(outputs) && outputs >= 2 && outputs % 2 === 0))
    throw new RangeError(`outputs: expected an even number of 2 or more, got ${outputs}`);
  if (!(width > 0 && Number.isFinite(width))) throw new RangeError(`width: expected more than 0, got ${width}`);
}
