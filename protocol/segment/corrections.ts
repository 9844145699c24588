/**
 * Late readings: a lattice index for a tick already closed. They come in runs (a link that was down hands over what it
 * kept), so each is told relative to the one before: ticks on, same channel or which, and the step from that channel's
 * last corrected index; range coded with adaptive bits, a run costs 1-2 bytes a reading.
 */
import { MAX_CHANNELS } from '../limits.ts';
import { type BitCoder, BitDecoder, BitEncoder, ONE } from './coder.ts';
import { MAX_INDEX, segmentError } from './limits.ts';

/** One late reading; the last word on its tick and channel. */
export interface Correction {
  readonly tick: number;
  readonly channel: number;
  /** Lattice index. */
  readonly index: number;
}

const CLASSES = 56;
const CHANNEL_BITS = 8;
const RATE = 4;
const FLOOR = 32;

/** Codes corrections in the order given. */
export function encodeCorrections(corrections: readonly Correction[], firstTick: number): Uint8Array {
  const encoder = new BitEncoder();
  const model = new CorrectionModel(encoder, firstTick);
  for (const correction of corrections) model.code(correction);
  return encoder.finish();
}

/**
 * Takes corrections back.
 *
 * throws  ProtocolError 'segment' when one names a channel, tick or index that cannot be
 */
export function decodeCorrections(bytes: Uint8Array, count: number, firstTick: number, channels: number): Correction[] {
  const decoder = new BitDecoder(bytes, 'corrections');
  const model = new CorrectionModel(decoder, firstTick);
  const nothing: Correction = { tick: firstTick, channel: 0, index: 0 };
  const corrections: Correction[] = [];
  for (let i = 0; i < count; i++) {
    const { tick, channel, index } = model.code(nothing);
    if (channel >= channels || tick < 0 || !Number.isSafeInteger(tick) || Math.abs(index) > MAX_INDEX)
      throw segmentError(`segment correction ${i}: expected a channel below ${channels} and a tick since 1970`, {
        tick,
        channel,
        index,
      });
    corrections.push(Object.freeze({ tick, channel, index }));
  }
  decoder.finish();
  return corrections;
}

/** Written once for both ways, as coder.ts explains. */
class CorrectionModel {
  readonly #coder: BitCoder;
  readonly #tickBits = freshBits();
  readonly #indexBits = freshBits();
  readonly #sameChannel = new Uint16Array(1).fill(ONE / 2);
  readonly #lastIndex = new Float64Array(MAX_CHANNELS);
  #tick: number;
  #channel = 0;

  constructor(coder: BitCoder, firstTick: number) {
    this.#coder = coder;
    this.#tick = firstTick;
  }

  code(correction: Correction): Correction {
    if (adaptiveBit(this.#coder, this.#sameChannel, 0, correction.channel === this.#channel ? 1 : 0) === 0)
      this.#channel = this.#plain(correction.channel);
    this.#tick += this.#signed(this.#tickBits, correction.tick - this.#tick);
    const last = this.#lastIndex[this.#channel]!;
    const index = last + this.#signed(this.#indexBits, correction.index - last);
    this.#lastIndex[this.#channel] = index;
    return { tick: this.#tick, channel: this.#channel, index };
  }

  #plain(value: number): number {
    let result = 0;
    for (let i = CHANNEL_BITS - 1; i >= 0; i--) result = 2 * result + this.#coder.code((value >> i) & 1, ONE / 2);
    return result;
  }

  /** Sign, then Exp-Golomb of the magnitude: its class in unary with adaptive bits, the rest plain (Teuhola 1978). */
  #signed(bits: Uint16Array, value: number): number {
    const negative = adaptiveBit(this.#coder, bits, CLASSES, value < 0 ? 1 : 0);
    const size = Math.abs(value) + 1;
    let bound = 2;
    let level = 0;
    while (level < CLASSES - 1 && adaptiveBit(this.#coder, bits, level, size >= bound ? 1 : 0) === 1) {
      level++;
      bound *= 2;
    }
    let whole = 1;
    for (let weight = bound / 4; weight >= 1; weight /= 2)
      whole = 2 * whole + this.#coder.code(Math.floor(size / weight) % 2, ONE / 2);
    return negative === 1 ? 1 - whole : whole - 1;
  }
}

function freshBits(): Uint16Array {
  return new Uint16Array(CLASSES + 1).fill(ONE / 2);
}

function adaptiveBit(coder: BitCoder, table: Uint16Array, at: number, value: number): number {
  const p = table[at]!;
  const bit = coder.code(value, p);
  table[at] = bit === 1 ? p + ((ONE - FLOOR - p) >> RATE) : p - ((p - FLOOR) >> RATE);
  return bit;
}
