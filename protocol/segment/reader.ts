/**
 * Takes the readings back out of a segment, one tick at a time, so that the filter can run beside it: the forecast made
 * before each tick is what the tick was coded against.
 */
import { stepsOf } from './coarseness.ts';
import { BitDecoder } from './coder.ts';
import { type Correction, decodeCorrections } from './corrections.ts';
import { readSegmentParts, type SegmentHead, stateCheck } from './header.ts';
import { MAX_INDEX, segmentError } from './limits.ts';
import { TickModel } from './tick-model.ts';
import { coarseScales } from './writer.ts';

/** Reads a segment back, tick by tick, from the forecasts that its writer was given. */
export class SegmentReader {
  readonly head: SegmentHead;
  readonly corrections: readonly Correction[];
  readonly #decoder: BitDecoder;
  readonly #model: TickModel;
  /** (nc) steps of the lattice to one that was coded; null: one each. */
  readonly #steps: Float64Array | null;
  readonly #forecast: Float64Array;
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
    this.#steps = stepsOf(head.coarseness);
    this.#forecast = new Float64Array(this.#steps === null ? 0 : head.channelCount);
    this.#model = new TickModel(head.channelCount, coarseScales(residualScaleSteps, this.#steps), head.format);
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
    const steps = this.#steps;
    if (steps === null) this.#model.code(this.#decoder, out, predicted, out);
    else {
      for (let c = 0; c < count; c++) this.#forecast[c] = predicted[c]! / steps[c]!;
      this.#model.code(this.#decoder, out, this.#forecast, out);
      for (let c = 0; c < count; c++) out[c] = checkBack(out[c]! * steps[c]!, c);
    }
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

/** A coded number within bounds may, in steps of the sensor, lie beyond them: nobody wrote that. */
function checkBack(index: number, channel: number): number {
  if (Math.abs(index) > MAX_INDEX)
    throw segmentError(`segment payload, channel ${channel}: expected an index within ±2^40, got ${index}`);
  return index;
}
