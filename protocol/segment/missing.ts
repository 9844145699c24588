/**
 * Which readings are there: one adaptive decision a value, given whether the channel was missing a tick ago and whether
 * the channel before it is missing now (a gateway loses its bus, not one register).
 *
 * A second decision tells a missing reading from one off the lattice, which then stands as the 64 bits that it came in.
 * Format 1 keeps that decision at the least probability that the coder knows, and refuses such readings.
 */
import { type BitCoder, ONE } from './coder.ts';
import { segmentError } from './limits.ts';

/** First probabilities of missing: [was present, was missing] × [neighbour present, neighbour missing, no neighbour]. */
const FIRST = [1 / 64, 1 / 4, 1 / 64, 1 / 2, 7 / 8, 3 / 4] as const;
const NEIGHBOURS = 3;
const PRIOR_COUNT = 8;
const MOST_COUNT = 128;
const LEAST = 8;
/** First probability that what is not on the lattice is off it, where that is allowed. */
const FIRST_OFF = ONE / 8;
const OFF_RATE = 4;

/** What became of a reading: it is there, on its lattice … */
export const PRESENT = 0;
/** … it is missing … */
export const MISSING = 1;
/** … or there, and off the lattice. */
export const OFF_LATTICE = 2;

/** Adaptive probability that a channel is missing, by whether it and its neighbour were. */
export class MissingModel {
  readonly #p = Uint16Array.from(FIRST, (p) => p * ONE);
  readonly #counts = new Uint8Array(FIRST.length).fill(PRIOR_COUNT);
  readonly #allowsOff: boolean;
  #off = FIRST_OFF;
  #was = 0;

  /** `allowsOff`: readings off the lattice may come. */
  constructor(allowsOff: boolean) {
    this.#allowsOff = allowsOff;
  }

  /** Codes what became of the value; `neighbour`: 0 there, 1 missing, 2 none. */
  code(coder: BitCoder, what: number, neighbour: number): number {
    const at = this.#was * NEIGHBOURS + neighbour;
    const p = this.#p[at]!;
    const bit = coder.code(what === PRESENT ? 0 : 1, p);
    const isOff = bit === 1 && this.#codeOff(coder, what);
    const count = this.#counts[at]!;
    const moved = p + Math.floor(((bit === 1 ? ONE : 0) - p) / count);
    this.#p[at] = moved < LEAST ? LEAST : Math.min(moved, ONE - LEAST);
    if (count < MOST_COUNT) this.#counts[at] = count + 1;
    this.#was = bit;
    if (isOff) return OFF_LATTICE;
    return bit === 1 ? MISSING : PRESENT;
  }

  #codeOff(coder: BitCoder, what: number): boolean {
    if (!this.#allowsOff) {
      if (coder.code(0, 1) === 0) return false;
      throw segmentError('segment payload: a reading off the lattice, which this segment format does not carry');
    }
    const bit = coder.code(what === OFF_LATTICE ? 1 : 0, this.#off);
    const moved = this.#off + (((bit === 1 ? ONE : 0) - this.#off) >> OFF_RATE);
    this.#off = moved < LEAST ? LEAST : Math.min(moved, ONE - LEAST);
    return bit === 1;
  }
}
