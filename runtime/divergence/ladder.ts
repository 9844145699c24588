/**
 * What is done about a filter whose forecasts leave all bounds for long. A reading beyond the bundle's guard counts one up
 * for its signal, one within it two down; the guard lies at ten robust spreads or more, so that a count of a few dozen comes
 * of no plant that the bundle knows. First the filter itself passes such readings over; then bounds are widened to
 * what errors have come to; then the filter starts afresh on the recent ticks; then the other bundle takes over; last, each
 * signal's last reading is held, with wide bounds, and the filter tried again from time to time. Each step is given time to
 * heal before the next, and is not taken again before readings have been near their forecasts for long.
 */
import type { DivergenceStep } from '@stillwell/protocol';
import { FOLDED, PASSED_OVER } from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';

/** Counts from which the step is said, … */
export const SAID = 4;
/** … bounds are widened, … */
export const WIDENED = 8;
/** … and the next step is taken. */
export const LONG = 32;
const MOST = 2 * LONG;
/** Ticks that a step is given to heal. */
export const REST_TICKS = 64;
/** Ticks near their forecasts after which all is forgotten. */
export const CALM_TICKS = 256;
/** Ticks held before the filter is tried again; twice as many after each try, up to the second number. */
export const FIRST_RETRY_TICKS = 512;
const MOST_RETRY_TICKS = 8192;
/** Share that one error moves their running mean by. */
const SHARE = 1 / 8;
/** Half-widths are so many times the mean error. */
const WIDE = 2.5;

/** What the engine is asked to do. */
export type LadderAction = 'reset' | 'previous-bundle' | 'holding';

/** See the file head. */
export class Ladder {
  #step: DivergenceStep | null = null;
  #sinceTick = 0;
  #reason = '';
  #count = new Int32Array(0);
  #error = new Float64Array(0);
  #tried: LadderAction | null = null;
  #actedAt = Number.NEGATIVE_INFINITY;
  #calm = 0;
  #retryTicks = FIRST_RETRY_TICKS;
  /** Times that a step beyond widening was taken, since the start. */
  readonly counts: Record<LadderAction, number> = { reset: 0, 'previous-bundle': 0, holding: 0 };

  /** What is being done; null: nothing. */
  get present(): { readonly step: DivergenceStep; readonly sinceTick: number; readonly reason: string } | null {
    return this.#step === null ? null : { step: this.#step, sinceTick: this.#sinceTick, reason: this.#reason };
  }

  /** Takes in the tick that `serving` has just folded in; what is to be done, null: nothing more. Widens its bounds itself. */
  observe(serving: Serving): LadderAction | null {
    const { model, state, least } = serving;
    if (this.#count.length !== model.signalCount) {
      this.#count = new Int32Array(model.signalCount);
      this.#error = new Float64Array(model.signalCount);
    }
    let worst = 0;
    for (let i = 0; i < model.signalCount; i++) {
      if (state.observed[i] === FOLDED || state.observed[i] === PASSED_OVER) {
        const error = Math.abs(state.innovation[i]!);
        const isFar = error > model.rejectSd * model.residualScale[i]!;
        this.#count[i] = isFar ? Math.min(MOST, this.#count[i]! + 1) : Math.max(0, this.#count[i]! - 2);
        this.#error[i] = this.#error[i]! + SHARE * (error - this.#error[i]!);
      }
      least[i] = this.#count[i]! >= WIDENED ? WIDE * this.#error[i]! : 0;
      if (this.#count[i]! > this.#count[worst]!) worst = i;
    }
    return this.#weigh(serving, worst);
  }

  /** The filter threw, or left its numbers: the next step, at once. */
  failed(tick: number, reason: string): LadderAction {
    return this.#take(tick, reason);
  }

  /** Whether a filter that is being held off is to be tried again. */
  isRetryDue(tick: number): boolean {
    return this.#step === 'holding' && tick - this.#actedAt >= this.#retryTicks;
  }

  /** It is tried; if it fails, it is held off for twice as long. */
  retried(tick: number): void {
    this.#retryTicks = Math.min(MOST_RETRY_TICKS, 2 * this.#retryTicks);
    this.#actedAt = tick;
    this.#say('reset', tick, 'tried again after readings were held');
    this.#count.fill(0);
  }

  /** The step that was asked for cannot be taken: there is no other bundle, or it fails as well. */
  holds(tick: number): void {
    if (this.#tried !== 'holding') this.counts.holding++;
    this.#tried = 'holding';
    this.#actedAt = tick;
    this.#say('holding', tick, this.#reason);
  }

  /** A held start: nothing in the data folder may serve. */
  begin(tick: number, reason: string): void {
    this.#tried = 'holding';
    this.#actedAt = tick;
    this.#say('holding', tick, reason);
  }

  /** Another bundle serves by a person's will. */
  clear(): void {
    this.#step = null;
    this.#tried = null;
    this.#actedAt = Number.NEGATIVE_INFINITY;
    this.#retryTicks = FIRST_RETRY_TICKS;
    this.#count.fill(0);
  }

  #weigh(serving: Serving, worst: number): LadderAction | null {
    const { tick } = serving;
    const count = this.#count[worst]!;
    this.#calm = count === 0 ? this.#calm + 1 : 0;
    if (this.#calm >= CALM_TICKS && this.#step !== null) this.clear();
    const name = serving.checked.bundle.channels[worst]!.name;
    const reason = `${name}: readings far from every forecast for ${count} ticks or more`;
    if (count >= LONG && tick - this.#actedAt >= REST_TICKS) return this.#take(tick, reason);
    if (this.#tried !== null) return null;
    const step = count >= WIDENED ? 'widened' : count >= SAID ? 'passing-over' : null;
    if (step === null && count === 0) this.#step = null;
    if (step !== null && step !== this.#step) this.#say(step, tick, reason);
    return null;
  }

  #take(tick: number, reason: string): LadderAction {
    const next = this.#tried === null ? 'reset' : this.#tried === 'reset' ? 'previous-bundle' : 'holding';
    this.#tried = next;
    this.#actedAt = tick;
    this.counts[next]++;
    this.#count.fill(0);
    this.#calm = 0;
    this.#say(next, tick, reason);
    return next;
  }

  #say(step: DivergenceStep, tick: number, reason: string): void {
    this.#step = step;
    this.#sinceTick = tick;
    this.#reason = reason;
  }
}
