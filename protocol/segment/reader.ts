/**
 * Takes the readings back out of a segment, one tick at a time, so that the filter can run beside it: the forecast made
 * before each tick is what the tick was coded against.
 */
import { BitDecoder } from './coder.ts';
import { type Correction, decodeCorrections } from './corrections.ts';
import { readSegmentParts, type SegmentHead, stateCheck } from './header.ts';
import { segmentError } from './limits.ts';
import { TickModel } from './tick-model.ts';

/** Reads a segment back, tick by tick, from the forecasts that its writer was given. */
export class SegmentReader {
  readonly head: SegmentHead;
  readonly corrections: readonly Correction[];
  readonly #decoder: BitDecoder;
  readonly #model: TickModel;
  #done = 0;

  /**
   * shapes  residualScaleSteps (nc), the very numbers the writer was given
   * throws  ProtocolError 'segment' when the bytes are damaged, cut, extended, hostile or of another format
   */
  constructor(bytes: Uint8Array, residualScaleSteps: Float64Array) {
    const { head, corrections, correctionCount, payload } = readSegmentParts(bytes);
    this.head = head;
    this.corrections = Object.freeze(
      decodeCorrections(corrections, correctionCount, head.firstTick, head.channelCount),
    );
    this.#model = new TickModel(head.channelCount, residualScaleSteps, head.format);
    this.#decoder = new BitDecoder(payload, 'payload');
    if (head.ticks === 0) this.#decoder.finish();
  }

  /** (nc) what the tick read last held off the lattice, in its own unit, NaN where nothing; null: the format has none. */
  get raw(): Float64Array | null {
    return this.#model.raw;
  }

  /**
   * Reads the next tick; false when there is none left.
   *
   * shapes  predicted, out (nc)
   * units   predicted in lattice steps as the writer had it; out in lattice indices, NaN where missing
   * throws  ProtocolError 'segment' when the payload ends early or goes on after the last tick
   */
  next(predicted: Float64Array, out: Float64Array): boolean {
    const count = this.head.channelCount;
    if (predicted.length !== count || out.length !== count)
      throw segmentError(`segment tick: expected ${count} channels, got ${predicted.length} and ${out.length}`);
    if (this.#done === this.head.ticks) return false;
    this.#model.code(this.#decoder, out, predicted, out);
    this.#done++;
    if (this.#done === this.head.ticks) this.#decoder.finish();
    return true;
  }

  /**
   * Proves a replay: the filter's saved state must be the one the gateway had.
   *
   * throws  ProtocolError 'segment' naming which end disagrees
   */
  checkState(which: 'start' | 'end', state: Uint8Array): void {
    const expected = which === 'start' ? this.head.startCheck : this.head.endCheck;
    const got = stateCheck(state);
    if (got !== expected)
      throw segmentError(
        `segment ${this.head.number} ${which} state: expected check ${expected.toString(16)}, got ${got.toString(16)}; ` +
          'the replay does not stand where the gateway stood (another bundle, or a segment missing before it)',
        { which, expected, got },
      );
  }
}
