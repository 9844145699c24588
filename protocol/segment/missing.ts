/**
 * Which readings are there: one adaptive decision a value, given whether the channel was missing a tick ago and whether
 * the channel before it is missing now (a gateway loses its bus, not one register).
 *
 * A second decision, at the least probability the coder knows, is kept for readings off the lattice; this format refuses
 * it, a later one may use it.
 */
import { type BitCoder, ONE } from './coder.ts';
import { segmentError } from './limits.ts';

/** First probabilities of missing: [was present, was missing] × [neighbour present, neighbour missing, no neighbour]. */
const FIRST = [1 / 64, 1 / 4, 1 / 64, 1 / 2, 7 / 8, 3 / 4] as const;
const NEIGHBOURS = 3;
const PRIOR_COUNT = 8;
const MOST_COUNT = 128;
const LEAST = 8;

/** Adaptive probability that a channel is missing, by whether it and its neighbour were. */
export class MissingModel {
  readonly #p = Uint16Array.from(FIRST, (p) => p * ONE);
  readonly #counts = new Uint8Array(FIRST.length).fill(PRIOR_COUNT);
  #was = 0;

  /** Codes whether the value is missing; `neighbour`: 0 present, 1 missing, 2 none. */
  code(coder: BitCoder, missing: boolean, neighbour: number): boolean {
    const at = this.#was * NEIGHBOURS + neighbour;
    const p = this.#p[at]!;
    const bit = coder.code(missing ? 1 : 0, p);
    if (bit === 1 && coder.code(0, 1) === 1)
      throw segmentError('segment payload: a reading off the lattice, which this segment format does not carry');
    const count = this.#counts[at]!;
    const moved = p + Math.floor(((bit === 1 ? ONE : 0) - p) / count);
    this.#p[at] = moved < LEAST ? LEAST : Math.min(moved, ONE - LEAST);
    if (count < MOST_COUNT) this.#counts[at] = count + 1;
    this.#was = bit;
    return bit === 1;
  }
}
