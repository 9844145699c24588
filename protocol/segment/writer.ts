/**
 * Closes a run of ticks into one segment. Push every tick in order, with what the filter forecast before it; late
 * readings go in by `correct`; `finish` gives the bytes. The same pushes give the same coded readings, wherever they run.
 */

import { SEGMENT_FORMAT } from '../version.ts';
import { ByteSink } from './bytes.ts';
import { stepsOf } from './coarseness.ts';
import { BitEncoder } from './coder.ts';
import { type Correction, encodeCorrections } from './corrections.ts';
import { checkHeadFields, type SegmentHeadFields, sealSegment, writeSegmentHead } from './header.ts';
import { MAX_CORRECTIONS, MAX_INDEX, MAX_SEGMENT_TICKS, MAX_SEGMENT_VALUES, segmentError } from './limits.ts';
import { TickModel } from './tick-model.ts';

/** What a writer must be told when it opens. */
export interface SegmentOpening extends SegmentHeadFields {
  /** (nc) expected size of a residual, in lattice steps, from the bundle; NaN where unknown. The reader needs the same. */
  readonly residualScaleSteps: Float64Array;
}

/** Scales that the coder starts from: the bundle's, in the steps that are coded. */
export function coarseScales(residualScaleSteps: Float64Array, steps: Float64Array | null): Float64Array {
  return steps === null ? residualScaleSteps : residualScaleSteps.map((scale, c) => scale / steps[c]!);
}

/** Writes a segment, tick by tick; `finish` closes it. */
export class SegmentWriter {
  readonly #fields: SegmentOpening;
  readonly #encoder = new BitEncoder();
  readonly #model: TickModel;
  readonly #scratch: Float64Array;
  /** (nc) steps of the lattice to one that is coded; null: one each. */
  readonly #steps: Float64Array | null;
  readonly #coarse: Float64Array;
  readonly #forecast: Float64Array;
  readonly #corrections: Correction[] = [];
  #ticks = 0;
  #finished = false;

  /** throws  ProtocolError 'segment' on a field no reader would take back */
  constructor(opening: SegmentOpening) {
    checkHeadFields(opening);
    const count = opening.channelCount;
    const coarseness = opening.coarseness?.slice() ?? new Uint8Array(count);
    this.#fields = { ...opening, stream: opening.stream.slice(), bundle: opening.bundle.slice(), coarseness };
    this.#steps = stepsOf(coarseness);
    const scales = coarseScales(opening.residualScaleSteps, this.#steps);
    this.#model = new TickModel(count, scales, opening.format ?? SEGMENT_FORMAT);
    this.#scratch = new Float64Array(count);
    this.#coarse = new Float64Array(this.#steps === null ? 0 : count);
    this.#forecast = new Float64Array(this.#coarse.length);
  }

  get ticks(): number {
    return this.#ticks;
  }

  /** Coded bytes so far, header and the last few bytes not counted; for closing by size. */
  get bytesSoFar(): number {
    return this.#encoder.sink.length;
  }

  /** (nc) size of each channel's residuals of late, in steps of its lattice: what its readings cost rises with it. 0: none came. */
  residualSteps(): Float64Array {
    return this.#model.scales().map((scale, c) => scale * (this.#steps?.[c] ?? 1));
  }

  /** Whether another tick still fits the limits of one segment. */
  get isFull(): boolean {
    const next = this.#ticks + 1;
    return next > MAX_SEGMENT_TICKS || next * this.#fields.channelCount > MAX_SEGMENT_VALUES;
  }

  /**
   * Adds one tick.
   *
   * shapes  lattice, predicted, raw (nc)
   * units   lattice indices, whole, multiples of 2^coarseness, NaN where missing; predictions in lattice steps, real, NaN
   *         where there is none; raw: readings off the lattice in their own unit, where the index is NaN, NaN for none; of
   *         the plain format alone
   * throws  ProtocolError 'segment' before anything is coded
   * cost    about 1-2 µs a channel; allocates nothing but the growing output
   */
  push(lattice: Float64Array, predicted: Float64Array, raw: Float64Array | null = null): void {
    this.#checkOpen();
    const count = this.#fields.channelCount;
    if (lattice.length !== count || predicted.length !== count)
      throw segmentError(`segment tick: expected ${count} channels, got ${lattice.length} and ${predicted.length}`);
    if (this.isFull) throw segmentError(`segment is full after ${this.#ticks} ticks: close it and open the next`);
    for (let c = 0; c < count; c++) checkIndex(lattice[c]!, c);
    if (raw !== null) this.#takeRaw(raw);
    if (this.#steps === null) this.#model.code(this.#encoder, lattice, predicted, this.#scratch);
    else this.#pushCoarse(lattice, predicted, this.#steps);
    this.#ticks++;
  }

  #pushCoarse(lattice: Float64Array, predicted: Float64Array, steps: Float64Array): void {
    for (let c = 0; c < steps.length; c++) {
      const index = lattice[c]! / steps[c]!;
      if (!Number.isNaN(index) && !Number.isInteger(index))
        throw segmentError(`segment channel ${c}: expected a multiple of ${steps[c]}, got ${lattice[c]}`);
      this.#coarse[c] = index;
      this.#forecast[c] = predicted[c]! / steps[c]!;
    }
    this.#model.code(this.#encoder, this.#coarse, this.#forecast, this.#scratch);
  }

  /** Adds a late reading for a tick already closed, in this segment or before; the last word on it. */
  correct(tick: number, channel: number, latticeIndex: number): void {
    this.#checkOpen();
    if (!Number.isSafeInteger(tick) || tick < 0)
      throw segmentError(`segment correction tick: expected a whole number since 1970, got ${tick}`);
    if (!Number.isInteger(channel) || channel < 0 || channel >= this.#fields.channelCount)
      throw segmentError(`segment correction channel: expected 0..${this.#fields.channelCount - 1}, got ${channel}`);
    if (Number.isNaN(latticeIndex)) throw segmentError('segment correction: expected a lattice index, got NaN');
    checkIndex(latticeIndex, channel);
    if (this.#corrections.length === MAX_CORRECTIONS)
      throw segmentError(`segment corrections: expected at most ${MAX_CORRECTIONS}, got one more`);
    this.#corrections.push({ tick, channel, index: latticeIndex });
  }

  /** Closes the segment; `endState` is the filter's saved state after the last tick, of which the segment keeps a check. */
  finish(endState: Uint8Array): Uint8Array {
    this.#checkOpen();
    this.#finished = true;
    const bytes = encodeCorrections(this.#corrections, this.#fields.firstTick);
    const sink = new ByteSink();
    writeSegmentHead(sink, this.#fields, this.#ticks, endState, { count: this.#corrections.length, bytes });
    if (this.#ticks > 0) sink.bytes(this.#encoder.finish());
    return sealSegment(sink);
  }

  #takeRaw(raw: Float64Array): void {
    if (this.#model.raw === null || raw.length !== this.#model.raw.length)
      throw segmentError('segment tick: readings off the lattice need the plain format, and one place a channel');
    const endless = raw.findIndex((value) => Math.abs(value) === Number.POSITIVE_INFINITY);
    if (endless >= 0)
      throw segmentError(`segment channel ${endless}: expected a finite reading or NaN, got ${raw[endless]}`);
    this.#model.raw.set(raw);
  }

  #checkOpen(): void {
    if (this.#finished) throw segmentError('segment is closed: open a new writer');
  }
}

function checkIndex(index: number, channel: number): void {
  if (Number.isNaN(index) || (Number.isInteger(index) && Math.abs(index) <= MAX_INDEX)) return;
  throw segmentError(`segment channel ${channel}: expected a whole lattice index within ±2^40 or NaN, got ${index}`, {
    channel,
    index,
  });
}
