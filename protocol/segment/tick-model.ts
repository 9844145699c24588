/**
 * One tick of all channels, in channel order: is it there, what do the others say of it, what is it. Written once for
 * both ways, as coder.ts explains.
 */

import { PLAIN_SEGMENT_FORMAT } from '../version.ts';
import { type BitCoder, ONE } from './coder.ts';
import { CrossRegression, GROUP } from './cross.ts';
import { MAX_INDEX, segmentError } from './limits.ts';
import { MISSING, MissingModel, OFF_LATTICE, PRESENT } from './missing.ts';
import { Predictors } from './predictors.ts';
import { codeIndex } from './value-code.ts';

const NO_NEIGHBOUR = 2;
/** Forecasts further out than any index are held here. */
const MOST_FORECAST = 2 * MAX_INDEX;

/** Codes one tick over all channels: the mask, then each reading by its predictors and its neighbours' residuals. */
export class TickModel {
  readonly #predictors: Predictors[] = [];
  readonly #missing: MissingModel[] = [];
  readonly #groups: CrossRegression[] = [];

  /** (nc) values off the lattice, where the format allows them; what `code` reads and writes beside the indices. */
  readonly raw: Float64Array | null;

  constructor(channelCount: number, residualScaleSteps: Float64Array, format: number) {
    if (residualScaleSteps.length !== channelCount)
      throw segmentError(`segment residual scales: expected ${channelCount}, got ${residualScaleSteps.length}`);
    this.raw = format === PLAIN_SEGMENT_FORMAT ? new Float64Array(channelCount).fill(Number.NaN) : null;
    for (let c = 0; c < channelCount; c++) {
      this.#predictors.push(new Predictors(residualScaleSteps[c]!));
      this.#missing.push(new MissingModel(this.raw !== null));
      if (c % GROUP === 0) this.#groups.push(new CrossRegression(Math.min(GROUP, channelCount - c)));
    }
  }

  /** (nc) scale of each channel's forecast errors now, in the steps that are coded; 0 where nothing was read. */
  scales(): Float64Array {
    return Float64Array.from(this.#predictors, ({ scale, hasLast }) => (hasLast ? scale : 0));
  }

  /** `out` gets the indices, NaN where missing or off the lattice; `lattice` and `raw` count only when `coder` writes. */
  code(coder: BitCoder, lattice: Float64Array, predicted: Float64Array, out: Float64Array): void {
    let neighbour = NO_NEIGHBOUR;
    for (const group of this.#groups) group.begin();
    for (let c = 0; c < this.#predictors.length; c++) {
      const index = lattice[c]!;
      const what = this.#missing[c]!.code(coder, Number.isNaN(index) ? this.#offOrMissing(c) : PRESENT, neighbour);
      neighbour = what === MISSING ? 1 : 0;
      const group = this.#groups[(c - (c % GROUP)) / GROUP]!;
      const expected = group.expected(c % GROUP);
      if (this.raw !== null) this.raw[c] = what === OFF_LATTICE ? codeBits(coder, this.raw[c]!) : Number.NaN;
      if (what !== PRESENT) {
        group.observe(c % GROUP, Number.NaN, expected);
        out[c] = Number.NaN;
      } else {
        out[c] = this.#codePresent(coder, c, index, predicted[c]!, expected, group);
      }
    }
    for (const group of this.#groups) group.end();
  }

  #offOrMissing(channel: number): number {
    return this.raw === null || Number.isNaN(this.raw[channel]!) ? MISSING : OFF_LATTICE;
  }

  #codePresent(
    coder: BitCoder,
    channel: number,
    index: number,
    predicted: number,
    expected: number,
    group: CrossRegression,
  ): number {
    const predictors = this.#predictors[channel]!;
    const known = Number.isFinite(predicted) || predictors.hasLast;
    const forecast = Number.isFinite(predicted) ? hold(predicted) : known ? predictors.last : 0;
    const scale = predictors.scale;
    predictors.prepare(forecast + expected * scale, forecast);
    const value = codeIndex(coder, predictors, index);
    if (!(value >= -MAX_INDEX && value <= MAX_INDEX))
      throw segmentError(`segment payload, channel ${channel}: expected an index within ±2^40, got ${value}`);
    group.observe(channel % GROUP, known ? (value - forecast) / scale : Number.NaN, expected);
    if (known) predictors.learn(value);
    else predictors.start(value);
    return value;
  }
}

function hold(forecast: number): number {
  return forecast > MOST_FORECAST ? MOST_FORECAST : Math.max(forecast, -MOST_FORECAST);
}

const bits = new DataView(new ArrayBuffer(8));

/** A float64 as its 64 bits, highest first; what a decoder is given does not matter. */
function codeBits(coder: BitCoder, value: number): number {
  bits.setFloat64(0, value);
  for (let i = 0; i < 8; i++) {
    let byte = bits.getUint8(i);
    for (let weight = 128; weight >= 1; weight /= 2) {
      const bit = coder.code((byte & weight) === 0 ? 0 : 1, ONE / 2);
      byte = bit === 1 ? byte | weight : byte & ~weight;
    }
    bits.setUint8(i, byte);
  }
  const read = bits.getFloat64(0);
  if (!Number.isFinite(read)) throw segmentError(`segment payload: expected a finite reading, got ${read}`);
  return read;
}
