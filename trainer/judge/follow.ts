/**
 * A filter led along a history. At ticks where nobody looks at what it says, such as those of its warm-up, it only moves its
 * memories, which takes a third of the time.
 */
import { catchUp, type FilterState, foldUnseen, type Model, update } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';

/** Leads a state, its own from then on. */
export class Follower {
  readonly state: FilterState;
  readonly #model: Model;
  readonly #series: Series;
  readonly #readings: Float64Array;
  /** Whether its guard can pass nothing over, so that a tick unseen ends in the same memories to the bit. */
  readonly #isOpen: boolean;
  #isBehind = false;

  constructor(model: Model, series: Series, state: FilterState) {
    this.state = state;
    this.#model = model;
    this.#series = series;
    this.#readings = new Float64Array(model.channelCount);
    const { rejectSd, residualScale, signalCount } = model;
    const { low, high } = state;
    // A forecast is clipped as a reading is, so that no innovation is larger.
    this.#isOpen = residualScale.every((sd, c) => c >= signalCount || rejectSd * sd >= high[c] - low[c]);
  }

  /**
   * Takes the tick at an index in. One that is not looked at is held against no forecast where that changes nothing, or, with
   * `isGuardLeft`, where only the guard would have asked for it.
   */
  take(at: number, isSeen = true, isGuardLeft = false): void {
    const readings = this.#readings;
    const { values, firstTick } = this.#series;
    for (let c = 0; c < readings.length; c++) readings[c] = values[c][at];
    const tick = firstTick + at;
    if (!isSeen && (this.#isOpen || isGuardLeft) && foldUnseen(this.#model, this.state, tick, readings)) {
      this.#isBehind = true;
      return;
    }
    this.catchUp();
    update(this.#model, this.state, tick, readings);
  }

  /** Makes the state whole, for those who go on from it. */
  catchUp(): void {
    if (this.#isBehind) catchUp(this.#model, this.state);
    this.#isBehind = false;
  }
}
