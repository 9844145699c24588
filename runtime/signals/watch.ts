/**
 * Watches over each signal's one-step innovations, and tells what its forecasts alone cannot: that it scatters far more than
 * it did when the bundle was calibrated, that it jumps again and again, that what comes no longer is what was forecast, or
 * that it slowly walks off. It changes nothing: neither filter nor record know of it, and it starts anew with the gateway.
 *
 * Innovations are divided by the largest of three spreads that the bundle has of them, and cut at four. Real ones have heavy
 * tails, come in calm and in busy hours, and neighbours are alike, so bounds for independent normal numbers speak too often:
 * the limits in service are those bounds for a very long run, and beyond that at least the factors below, measured on
 * held-out data (runtime/README.md).
 */
import { dequantise } from '@stillwell/protocol';
import {
  disagreesWith,
  type FilterState,
  FOLDED,
  MISSING,
  MOST_DIFFERENCE,
  type Model,
  PASSED_OVER,
  standsStill,
} from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';
import { chiSquareLimit } from './chi-square.ts';
import { cusum, limitFor } from './cusum.ts';

/** Readings of a block, whose mean square is held against its bound; even, see chi-square.ts. */
export const BLOCK = 60;
/** Readings to a false word, were innovations independent and normal. */
export const RUN_LENGTH = 1_000_000;
/** A block's mean square is no news below this: twice the spread. */
const LEAST_RATIO = 4;
/** Blocks one after another that must say the same. */
const BLOCKS = 2;
/** Share of the innovations' summed size that lies on one side, from which they are no noise but an error that lasts. */
const ONE_SIDED = 0.6;
/** The limit of sums is so many times that of independent numbers: neighbours are alike. */
const SUM_FACTOR = 6;
/** Sums grow to so many limits at most, so that forecasts that are right again are seen. */
const MOST_LIMITS = 2;
/** Jumps within the last hundred or so readings from which a signal counts as jumping, and below which it no longer does. */
const MANY_JUMPS = 5;
const FEW_JUMPS = 2.5;
const JUMPS_FADE = 1 - 1 / 128;

/** Mean square of a block, in variances, above which it is beyond its bound. */
export const BLOCK_LIMIT = Math.max(LEAST_RATIO, chiSquareLimit(BLOCK, BLOCK / RUN_LENGTH) / BLOCK);
/** Of the sums, above which a signal drifts. */
export const SUM_LIMIT = SUM_FACTOR * limitFor(RUN_LENGTH);

/** The judge's error counts to so many times the other two at most: spikes of a history are no spread. */
const MOST_JUDGED = 3;

/**
 * Spread of the one-step innovations by signal: the largest of the robust one, of the half-width of the first step's
 * bounds, and of the judge's error at the first step. A robust one alone takes busy hours for noise.
 *
 * units   standardised
 */
export function expectedSpread({ model, checked, bounds }: Serving): Float64Array {
  const { horizons, mse } = checked.bundle.judge;
  const squares = horizons[0] === 1 ? dequantise(mse) : new Float64Array(0);
  return Float64Array.from({ length: model.signalCount }, (_, i) => {
    const known = Math.max(model.residualScale[i]!, bounds.calibrated[i * model.horizon]! / bounds.quantile);
    const judged = Math.sqrt(squares[i * horizons.length] ?? 0);
    return Math.max(known, Math.min(judged, MOST_JUDGED * known));
  });
}

/** See the file head. Buffers are written in place; a tick allocates nothing. */
export class SignalWatch {
  /** (nc) readings refused since the start. */
  readonly refused: Int32Array;
  /** (nc) readings passed over since the start. */
  readonly passedOver: Int32Array;
  /** Readings since the start of signals that hung, and of signals that drifted or disagreed. */
  hanging = 0;
  drifting = 0;
  #model: Model | null = null;
  #spread: Float64Array = new Float64Array(0);
  /** (ny) of the open block: readings, squares, sizes, and the sum. */
  #count = new Int32Array(0);
  #squares = new Float64Array(0);
  #sizes = new Float64Array(0);
  #sum = new Float64Array(0);
  /** (ny) mean square of the last whole block. */
  #last = new Float64Array(0);
  /** (ny) blocks in a row beyond the bound: as noise, as an error that lasts. */
  #noisy = new Uint8Array(0);
  #astray = new Uint8Array(0);
  /** (2·ny) */
  #sums = new Float64Array(0);
  /** (ny) */
  #jumps = new Float64Array(0);
  #isJumping = new Uint8Array(0);
  /** (ny) side of the guard that the last reading lay on: −1, 0 within, 1. */
  #side = new Int8Array(0);
  /** (ny) 1 where the tick before had no reading: what comes after is judged by how long it was away, not here. */
  #wasAway = new Uint8Array(0);

  constructor(channelCount: number) {
    this.refused = new Int32Array(channelCount);
    this.passedOver = new Int32Array(channelCount);
  }

  /** Takes in the tick that `serving` has just folded in. Another model starts afresh; counts go on. */
  observe(serving: Serving): void {
    const { model, state } = serving;
    if (model !== this.#model) this.#begin(serving);
    for (let i = 0; i < model.signalCount; i++) {
      const observed = state.observed[i];
      if (observed === PASSED_OVER) this.passedOver[i]!++;
      if (observed === FOLDED || observed === PASSED_OVER) this.#take(model, state, i);
      else this.#wasAway[i] = 1;
      if (observed !== MISSING && standsStill(model, state, i)) this.hanging++;
      if (observed !== MISSING && (this.isDrifting(i) || disagreesWith(model, state, i) >= 0)) this.drifting++;
    }
  }

  isNoisy(signal: number): boolean {
    return this.#noisy[signal]! >= BLOCKS;
  }

  isImplausible(signal: number): boolean {
    return this.#astray[signal]! >= BLOCKS;
  }

  isJumping(signal: number): boolean {
    return this.#isJumping[signal] === 1;
  }

  isDrifting(signal: number): boolean {
    const ny = this.#jumps.length;
    return Math.max(this.#sums[signal]!, this.#sums[ny + signal]!) > SUM_LIMIT;
  }

  /** How many times wider than expected innovations scattered in the last whole block. */
  timesWider(signal: number): number {
    return Math.sqrt(this.#last[signal]!);
  }

  #begin(serving: Serving): void {
    const ny = serving.model.signalCount;
    this.#model = serving.model;
    this.#spread = expectedSpread(serving);
    this.#squares = new Float64Array(ny);
    this.#sizes = new Float64Array(ny);
    this.#sum = new Float64Array(ny);
    this.#last = new Float64Array(ny);
    this.#jumps = new Float64Array(ny);
    this.#noisy = new Uint8Array(ny);
    this.#astray = new Uint8Array(ny);
    this.#isJumping = new Uint8Array(ny);
    this.#count = new Int32Array(ny);
    this.#sums = new Float64Array(2 * ny);
    this.#side = new Int8Array(ny);
    this.#wasAway = new Uint8Array(ny).fill(1);
  }

  #take(model: Model, state: FilterState, i: number): void {
    const innovation = state.innovation[i]!;
    this.#jump(i, innovation, model.rejectSd * model.residualScale[i]!);
    const wasAway = this.#wasAway[i] === 1;
    this.#wasAway[i] = 0;
    if (wasAway) return;
    const share = Math.min(MOST_DIFFERENCE, Math.max(-MOST_DIFFERENCE, innovation / this.#spread[i]!));
    const ny = model.signalCount;
    const most = MOST_LIMITS * SUM_LIMIT;
    this.#sums[i] = Math.min(most, cusum(this.#sums[i]!, share));
    this.#sums[ny + i] = Math.min(most, cusum(this.#sums[ny + i]!, -share));
    this.#squares[i]! += share * share;
    this.#sizes[i]! += Math.abs(share);
    this.#sum[i]! += share;
    this.#count[i]!++;
    if (this.#count[i] === BLOCK) this.#closeBlock(i);
  }

  #closeBlock(i: number): void {
    this.#last[i] = this.#squares[i]! / BLOCK;
    const isBeyond = this.#last[i]! > BLOCK_LIMIT;
    const isOneSided = Math.abs(this.#sum[i]!) > ONE_SIDED * this.#sizes[i]!;
    this.#noisy[i] = isBeyond && !isOneSided ? Math.min(BLOCKS, this.#noisy[i]! + 1) : 0;
    this.#astray[i] = isBeyond && isOneSided ? Math.min(BLOCKS, this.#astray[i]! + 1) : 0;
    this.#count[i] = 0;
    this.#squares[i] = 0;
    this.#sizes[i] = 0;
    this.#sum[i] = 0;
  }

  /** A spike or a level shift counts once, however long forecasts take to find back. */
  #jump(i: number, innovation: number, width: number): void {
    const side = innovation > width ? 1 : innovation < -width ? -1 : 0;
    this.#jumps[i]! *= JUMPS_FADE;
    if (side !== 0 && side !== this.#side[i]) this.#jumps[i]!++;
    this.#side[i] = side;
    if (this.#jumps[i]! >= MANY_JUMPS) this.#isJumping[i] = 1;
    else if (this.#jumps[i]! < FEW_JUMPS) this.#isJumping[i] = 0;
  }
}
