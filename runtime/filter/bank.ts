/**
 * The feature bank: what the filter remembers of one channel's past. Exponential means, damped resonators and a ring of
 * past values, all fixed beforehand, so nothing in the recursion is trained and nothing can blow up; every feature is
 * level-invariant (a constant past gives zeros), so a change of level alone moves no forecast but the level itself. One
 * more may be added for plants that return to their mean: how far the value stands from it.
 *
 *   exponential mean   e ← a e + (1 − a) z                      feature  e − z
 *   resonator          s ← c s + (1 − |c|) z, complex           features Re, Im of s − g z,  g = (1 − |c|) / (1 − c)
 *   level              none                                      feature  − z(t)
 *   ring lag l         z(t − l)                                  feature  z(t − l) − z(t)
 *
 * Each feature is multiplied by its power of two and clipped to ±FEATURE_LIMIT, so no past whatever makes a forecast
 * that is not finite. Steady state for a constant z0 is e = z0, s = g z0: there the memories start.
 *
 * Memory of one channel: decays first, then resonators as re, im, re, im. The ring holds z(t − 1) … z(t − L) while z(t)
 * itself stands in the state, since the lag-L feature of tick t needs a value L ticks old.
 */
import type { BankModel } from './model.ts';

/** Largest size of a scaled feature; features have a standard deviation near one in training. */
export const FEATURE_LIMIT = 12;

/** Numbers worked out once from a model's poles. */
export interface BankConstants {
  readonly decayCount: number;
  readonly resonatorCount: number;
  /** Numbers remembered for a channel beside its ring: decays + 2 × resonators. */
  readonly memoryCount: number;
  /** Longest lag; 0 without lags. */
  readonly ringLength: number;
  /** (decays) 1 − a */
  readonly decayGain: Float64Array;
  /** (resonators) 1 − |c| */
  readonly resonatorGain: Float64Array;
  /** (resonators) g, the steady state for a constant one */
  readonly steadyRe: Float64Array;
  readonly steadyIm: Float64Array;
}

/**
 * Works out the bank's constants from the poles.
 *
 * source  g = (1 − |c|)/(1 − c) = (1 − |c|)(1 − c̄)/|1 − c|²; |c| by √ alone
 * cost    O(decays + resonators); once per state
 */
export function bankConstants(model: BankModel): BankConstants {
  const decayCount = model.decays.length;
  const resonatorCount = model.resonatorRe.length;
  const decayGain = new Float64Array(decayCount);
  for (let k = 0; k < decayCount; k++) decayGain[k] = 1 - model.decays[k];
  const resonatorGain = new Float64Array(resonatorCount);
  const steadyRe = new Float64Array(resonatorCount);
  const steadyIm = new Float64Array(resonatorCount);
  for (let k = 0; k < resonatorCount; k++) {
    const re = model.resonatorRe[k];
    const im = model.resonatorIm[k];
    const gain = 1 - Math.sqrt(re * re + im * im);
    const awayRe = 1 - re;
    const size = awayRe * awayRe + im * im;
    resonatorGain[k] = gain;
    steadyRe[k] = (gain * awayRe) / size;
    steadyIm[k] = (gain * im) / size;
  }
  return {
    decayCount,
    resonatorCount,
    memoryCount: decayCount + 2 * resonatorCount,
    ringLength: model.lags.length === 0 ? 0 : model.lags[model.lags.length - 1],
    decayGain,
    resonatorGain,
    steadyRe,
    steadyIm,
  };
}

/**
 * Sets a channel's memories to their steady state for a past that always was its value of now.
 *
 * shapes  memory (nc × memoryCount), ring (nc × ringLength), values (nc)
 * units   standardised
 */
export function settleChannel(
  bank: BankConstants,
  memory: Float64Array,
  ring: Float64Array,
  values: Float64Array,
  channel: number,
): void {
  const value = values[channel];
  const at = channel * bank.memoryCount;
  for (let k = 0; k < bank.decayCount; k++) memory[at + k] = value;
  let m = at + bank.decayCount;
  for (let k = 0; k < bank.resonatorCount; k++) {
    memory[m++] = bank.steadyRe[k] * value;
    memory[m++] = bank.steadyIm[k] * value;
  }
  const ringAt = channel * bank.ringLength;
  for (let k = 0; k < bank.ringLength; k++) ring[ringAt + k] = value;
}

/**
 * Moves a channel's exponential means and resonators one tick on with its folded-in value.
 *
 * shapes  memory (nc × memoryCount), values (nc)
 * units   standardised
 * cost    O(memoryCount); allocates nothing
 */
export function advanceChannel(
  model: BankModel,
  bank: BankConstants,
  memory: Float64Array,
  values: Float64Array,
  channel: number,
): void {
  const value = values[channel];
  let m = channel * bank.memoryCount;
  for (let k = 0; k < bank.decayCount; k++, m++) memory[m] = model.decays[k] * memory[m] + bank.decayGain[k] * value;
  for (let k = 0; k < bank.resonatorCount; k++, m += 2) {
    const re = memory[m];
    const im = memory[m + 1];
    const poleRe = model.resonatorRe[k];
    const poleIm = model.resonatorIm[k];
    memory[m] = poleRe * re - poleIm * im + bank.resonatorGain[k] * value;
    memory[m + 1] = poleRe * im + poleIm * re;
  }
}

/**
 * Writes a channel's scaled, clipped features.
 *
 * shapes  memory (nc × memoryCount), ring (nc × ringLength), values (nc) of this tick, out (nc·F), filled from channel · F
 * units   standardised; `ringAt` is the slot of the oldest value, where the next one will go
 * cost    O(F); allocates nothing
 */
export function writeFeatures(
  model: BankModel,
  bank: BankConstants,
  memory: Float64Array,
  ring: Float64Array,
  ringAt: number,
  values: Float64Array,
  channel: number,
  out: Float64Array,
): void {
  const value = values[channel];
  const scale = model.featureScale;
  let m = channel * bank.memoryCount;
  let f = channel * model.featureCount;
  for (let k = 0; k < bank.decayCount; k++, m++, f++) out[f] = (memory[m] - value) * scale[f];
  for (let k = 0; k < bank.resonatorCount; k++, m += 2, f += 2) {
    out[f] = (memory[m] - bank.steadyRe[k] * value) * scale[f];
    out[f + 1] = (memory[m + 1] - bank.steadyIm[k] * value) * scale[f + 1];
  }
  if (model.level === true) {
    out[f] = -value * scale[f];
    f++;
  }
  const start = channel * bank.ringLength;
  for (let k = 0; k < model.lags.length; k++, f++) {
    let slot = ringAt - model.lags[k];
    if (slot < 0) slot += bank.ringLength;
    out[f] = (ring[start + slot] - value) * scale[f];
  }
  for (let k = channel * model.featureCount; k < f; k++) {
    if (out[k] > FEATURE_LIMIT) out[k] = FEATURE_LIMIT;
    else if (out[k] < -FEATURE_LIMIT) out[k] = -FEATURE_LIMIT;
  }
}
