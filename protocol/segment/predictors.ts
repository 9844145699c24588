/**
 * One channel's model of its next lattice index.
 */
import { type BitCoder, ONE } from './coder.ts';

const BUCKETS = 42;

/** Adaptive bits for whole numbers: Exp-Golomb buckets, sign and low bits. */
export class ChannelModel {
  readonly #zero = new Uint16Array(3).fill(ONE / 2);
  readonly #sign = new Uint16Array(3).fill(ONE / 2);
  readonly #bucket = new Uint16Array(BUCKETS).fill(ONE / 2);
  #missing = new Uint16Array(2).fill(ONE / 64);
  #last = 0;
  #wasMissing = 0;

  constructor(_residualScaleSteps: number) {}

  /** Codes one index (NaN: missing) and gives it back. */
  code(coder: BitCoder, index: number, predicted: number): number {
    const missing = bit(coder, this.#missing, this.#wasMissing, Number.isNaN(index) ? 1 : 0);
    this.#wasMissing = missing;
    if (missing === 1) return Number.NaN;
    const centre = Number.isNaN(predicted) ? this.#last : Math.round(predicted);
    const residual = index - centre;
    const value = centre + this.#residual(coder, residual);
    this.#last = value;
    return value;
  }

  #residual(coder: BitCoder, residual: number): number {
    if (bit(coder, this.#zero, 0, residual === 0 ? 1 : 0) === 1) return 0;
    const negative = bit(coder, this.#sign, 0, residual < 0 ? 1 : 0);
    const size = Math.abs(residual);
    let bucket = 0;
    while (bucket < BUCKETS - 1 && bit(coder, this.#bucket, bucket, size >= 2 ** (bucket + 1) ? 1 : 0) === 1) bucket++;
    let rest = 0;
    for (let weight = 2 ** (bucket - 1); weight >= 1; weight /= 2)
      rest = rest * 2 + coder.code(Math.floor(size / weight) % 2, ONE / 2);
    const whole = 2 ** bucket + rest;
    return negative === 1 ? -whole : whole;
  }
}

function bit(coder: BitCoder, table: Uint16Array, at: number, value: number): number {
  const p = table[at]!;
  const result = coder.code(value, p);
  table[at] = result === 1 ? p + ((ONE - 32 - p) >> 5) : p - ((p - 32) >> 5);
  return result;
}
