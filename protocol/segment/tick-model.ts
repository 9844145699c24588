/**
 * One tick of all channels, in channel order: is it there, what do the others say of it, what is it. Written once for
 * both ways, as coder.ts explains.
 */
import type { BitCoder } from './coder.ts';
import { CrossRegression, GROUP } from './cross.ts';
import { MAX_INDEX, segmentError } from './limits.ts';
import { MissingModel } from './missing.ts';
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

  constructor(channelCount: number, residualScaleSteps: Float64Array) {
    if (residualScaleSteps.length !== channelCount)
      throw segmentError(`segment residual scales: expected ${channelCount}, got ${residualScaleSteps.length}`);
    for (let c = 0; c < channelCount; c++) {
      this.#predictors.push(new Predictors(residualScaleSteps[c]!));
      this.#missing.push(new MissingModel());
      if (c % GROUP === 0) this.#groups.push(new CrossRegression(Math.min(GROUP, channelCount - c)));
    }
  }

  /** `out` gets the indices, NaN where missing; `lattice` counts only when `coder` writes. */
  code(coder: BitCoder, lattice: Float64Array, predicted: Float64Array, out: Float64Array): void {
    let neighbour = NO_NEIGHBOUR;
    for (const group of this.#groups) group.begin();
    for (let c = 0; c < this.#predictors.length; c++) {
      const index = lattice[c]!;
      const missing = this.#missing[c]!.code(coder, Number.isNaN(index), neighbour);
      neighbour = missing ? 1 : 0;
      const group = this.#groups[(c - (c % GROUP)) / GROUP]!;
      const expected = group.expected(c % GROUP);
      if (missing) {
        group.observe(c % GROUP, Number.NaN, expected);
        out[c] = Number.NaN;
      } else {
        out[c] = this.#codePresent(coder, c, index, predicted[c]!, expected, group);
      }
    }
    for (const group of this.#groups) group.end();
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
