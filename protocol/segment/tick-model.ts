/**
 * One tick of all channels, in channel order, through their models.
 */
import type { BitCoder } from './coder.ts';
import { segmentError } from './limits.ts';
import { ChannelModel } from './predictors.ts';

export class TickModel {
  readonly #channels: ChannelModel[] = [];

  constructor(channelCount: number, residualScaleSteps: Float64Array) {
    if (residualScaleSteps.length !== channelCount)
      throw segmentError(`segment residual scales: expected ${channelCount}, got ${residualScaleSteps.length}`);
    for (let c = 0; c < channelCount; c++) this.#channels.push(new ChannelModel(residualScaleSteps[c]!));
  }

  /** `out` gets the indices; `lattice` counts only when `coder` writes. */
  code(coder: BitCoder, lattice: Float64Array, predicted: Float64Array, out: Float64Array): void {
    for (let c = 0; c < this.#channels.length; c++) out[c] = this.#channels[c]!.code(coder, lattice[c]!, predicted[c]!);
  }
}
