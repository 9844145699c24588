/**
 * What the filter remembers between ticks. The memories that move one-step predictions (folded value, age of the last
 * reading, and what the kind keeps in its core) are the state proper and are all that a snapshot holds; the rest is worked
 * out from them.
 */
import type { Core } from './kernel.ts';
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { createResponseBuffers, type ResponseBuffers } from './response.ts';
import { createRoundMemory } from './round.ts';

/** Values of `observed`: no reading at the tick. */
export const MISSING = 0;
/** Values of `observed`: the reading was folded in. */
export const FOLDED = 1;
/** Values of `observed`: a reading came but lay too far from its forecast, and was passed over. */
export const PASSED_OVER = 2;
/** Values of `observed`: a reading came but repeats itself as no working sensor does; it counts as missing. */
export const STUCK = 3;

/** Shortest fade: with a horizon of a tick or two, one missed reading would throw the forecast onto the seasonal mean. */
const LEAST_FADE_TICKS = 8;

/**
 * Ticks without a reading after which a signal's forecast begins to fade to its seasonal mean, over as many again: the
 * horizon, or 8 where that is shorter.
 */
export function fadeTicks(model: CommonModel): number {
  return Math.max(model.horizon, LEAST_FADE_TICKS);
}

/**
 * The filter's buffers: written by `update` in place, once a tick; read by everything else.
 *
 * shapes  nc channels (signals first), d order
 * units   standardised, z = (y − mean) / scale
 */
export interface FilterState {
  /** Tick folded in last; −1 before the first. */
  tick: number;
  /** (nc) value folded in last: the reading, or what stood in for it. */
  readonly value: Float64Array;
  /** (nc) what the kernel sees of it: less the round; the same array where the model has none. */
  readonly rest: Float64Array;
  /** (ny × (W + 1)) values of the last round, see round.ts; empty without one. */
  readonly roundMemory: Float64Array;
  /** (nc) one-step forecast that the last tick was held against. */
  readonly predicted: Float64Array;
  /** (nc) reading of the last tick, clipped; NaN where missing. */
  readonly reading: Float64Array;
  /** (nc) reading − one-step forecast, NaN where missing; present also for a reading passed over. */
  readonly innovation: Float64Array;
  /** (nc) MISSING, FOLDED, PASSED_OVER or STUCK. */
  readonly observed: Uint8Array;
  /** (nc) 1 once a reading has been folded in. */
  readonly started: Uint8Array;
  /** (nc) ticks since a reading was folded in; counts up to 2 × fadeTicks, which also stands for "never". */
  readonly age: Int32Array;
  /** (nc) readings passed over, less those that came near their forecast since; 0 to rejectMaxTicks, where the guard opens. */
  readonly passed: Int32Array;
  /** (nc) how far off the reading passed over last lay, in 64ths of the guard's width; 0: folded in since. */
  readonly lean: Int16Array;
  /** What the kind remembers, and what follows from it; read and written by its kernel alone. */
  readonly core: Core;
  /** (d) the predictive state */
  readonly x: Float64Array;
  /** Of the response to plans; null where the model has none. */
  readonly response: ResponseBuffers | null;
  /** (ny) readings alike up to the last one, 65535 for all beyond; 0 before the first. Empty without that guard. */
  readonly repeats: Int32Array;
  /** (ny) the reading that they are, in units of the signal. */
  readonly repeated: Float64Array;
  /** (2·ny) cumulative sums of what signals say above and below what the others say of them; empty without agreement. */
  readonly disagreement: Float64Array;
  /** (nc) clips, standardised */
  readonly low: Float64Array;
  readonly high: Float64Array;
}

/**
 * A state before its first tick: every channel at its mean, features zero.
 *
 * shapes  as FilterState; allocates all that filtering will ever need
 */
export function createState(model: Model): FilterState {
  const nc = model.channelCount;
  const core = kernelOf(model).createCore(model);
  const standardised = (values: Float64Array): Float64Array =>
    values.map((v, c) => (v - model.mean[c]) / model.scale[c]);
  const value = new Float64Array(nc);
  return {
    tick: -1,
    value,
    rest: model.round === undefined ? value : new Float64Array(nc),
    roundMemory: createRoundMemory(model),
    predicted: new Float64Array(nc),
    reading: new Float64Array(nc).fill(Number.NaN),
    innovation: new Float64Array(nc).fill(Number.NaN),
    observed: new Uint8Array(nc),
    started: new Uint8Array(nc),
    age: new Int32Array(nc).fill(2 * fadeTicks(model)),
    passed: new Int32Array(nc),
    lean: new Int16Array(nc),
    core,
    x: core.x,
    response: model.response === undefined ? null : createResponseBuffers(model, model.response),
    repeats: new Int32Array(model.stuck === undefined ? 0 : model.signalCount),
    repeated: new Float64Array(model.stuck === undefined ? 0 : model.signalCount),
    disagreement: new Float64Array(model.agreement === undefined ? 0 : 2 * model.signalCount),
    low: standardised(model.clipLow),
    high: standardised(model.clipHigh),
  };
}
