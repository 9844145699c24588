/**
 * What the filter remembers between ticks. The memories that move one-step predictions (folded value, means, resonators,
 * ring, age of the last reading) are the state proper and are all that a snapshot holds; the rest is worked out from them.
 */
import { type BankConstants, bankConstants, writeFeatures } from './bank.ts';
import { multiply } from './dense.ts';
import type { LinearModel } from './model.ts';

/** Values of `observed`: no reading at the tick. */
export const MISSING = 0;
/** Values of `observed`: the reading was folded in. */
export const FOLDED = 1;
/** Values of `observed`: a reading came but lay too far from its forecast, and was passed over. */
export const PASSED_OVER = 2;

/** Shortest fade: with a horizon of a tick or two, one missed reading would throw the forecast onto the seasonal mean. */
const LEAST_FADE_TICKS = 8;

/**
 * Ticks without a reading after which a signal's forecast begins to fade to its seasonal mean, over as many again: the
 * horizon, or 8 where that is shorter.
 */
export function fadeTicks(model: LinearModel): number {
  return Math.max(model.horizon, LEAST_FADE_TICKS);
}

/**
 * The filter's buffers: written by `update` in place, once a tick; read by everything else.
 *
 * shapes  nc channels (signals first), F features a channel, d order, ny signals, r basis
 * units   standardised, z = (y − mean) / scale
 */
export interface FilterState {
  /** Tick folded in last; −1 before the first. */
  tick: number;
  /** (nc) value folded in last: the reading, or what stood in for it. */
  readonly value: Float64Array;
  /** (nc) one-step forecast that the last tick was held against. */
  readonly predicted: Float64Array;
  /** (nc) reading of the last tick, clipped; NaN where missing. */
  readonly reading: Float64Array;
  /** (nc) reading − one-step forecast, NaN where missing; present also for a reading passed over. */
  readonly innovation: Float64Array;
  /** (nc) MISSING, FOLDED or PASSED_OVER. */
  readonly observed: Uint8Array;
  /** (nc) 1 once a reading has been folded in. */
  readonly started: Uint8Array;
  /** (nc) ticks since a reading was folded in; counts up to 2 × fadeTicks, which also stands for "never". */
  readonly age: Int32Array;
  /** (nc) readings passed over, less those that came near their forecast since; 0 to rejectMaxTicks, where the guard opens. */
  readonly passed: Int32Array;
  /** (nc × memoryCount) */
  readonly memory: Float64Array;
  /** (nc × ringLength) */
  readonly ring: Float64Array;
  /** Slot of the ring that holds the oldest value. */
  ringAt: number;
  /** (nc·F) */
  readonly features: Float64Array;
  /** (d) the predictive state */
  readonly x: Float64Array;
  /** (ny·r) */
  readonly coefficients: Float64Array;
  readonly bank: BankConstants;
  /** (nc) clips, standardised */
  readonly low: Float64Array;
  readonly high: Float64Array;
}

/**
 * A state before its first tick: every channel at its mean, features zero.
 *
 * shapes  as FilterState; allocates all that filtering will ever need
 */
export function createState(model: LinearModel): FilterState {
  const nc = model.channelCount;
  const bank = bankConstants(model);
  const standardised = (values: Float64Array): Float64Array =>
    values.map((v, c) => (v - model.mean[c]) / model.scale[c]);
  return {
    tick: -1,
    value: new Float64Array(nc),
    predicted: new Float64Array(nc),
    reading: new Float64Array(nc).fill(Number.NaN),
    innovation: new Float64Array(nc).fill(Number.NaN),
    observed: new Uint8Array(nc),
    started: new Uint8Array(nc),
    age: new Int32Array(nc).fill(2 * fadeTicks(model)),
    passed: new Int32Array(nc),
    memory: new Float64Array(nc * bank.memoryCount),
    ring: new Float64Array(nc * bank.ringLength),
    ringAt: 0,
    features: new Float64Array(nc * model.featureCount),
    x: new Float64Array(model.order),
    coefficients: new Float64Array(model.signalCount * model.basisCount),
    bank,
    low: standardised(model.clipLow),
    high: standardised(model.clipHigh),
  };
}

/**
 * Works out features, predictive state and forecast coefficients from the memories: φ, then x = W φ, then V x.
 *
 * shapes  features (nc·F), x (d), coefficients (ny·r)
 * cost    O(d · nc·F + ny·r · d); allocates nothing
 */
export function refresh(model: LinearModel, state: FilterState): void {
  const { bank, memory, ring, ringAt, value, features } = state;
  for (let c = 0; c < model.channelCount; c++) {
    writeFeatures(model, bank, memory, ring, ringAt, value, c, features);
  }
  multiply(model.bottleneck, model.order, features.length, features, 0, state.x, 0);
  multiply(model.readout, state.coefficients.length, model.order, state.x, 0, state.coefficients, 0);
}
