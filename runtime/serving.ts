/**
 * One bundle at work: its model, the filter's state and bounds, and the forecast of the present tick. Steps are the same
 * whether ticks come live, from the journal after a restart, or from the recent ticks that warm a new bundle.
 */
import { type Bundle, coarseIndex, latticeIndex, latticeValue, MAX_INDEX } from '@stillwell/protocol';
import {
  type Bounds,
  createBounds,
  createState,
  type FilterState,
  FOLDED,
  fadeTicks,
  forecastPath,
  intervalOf,
  MISSING,
  type Model,
  predictNext,
  restoreBounds,
  restoreState,
  saveBounds,
  saveState,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import type { Recorded } from './residuals/recorded.ts';

/** A bundle that passed every check. */
export interface CheckedBundle {
  readonly bundle: Bundle;
  readonly model: Model;
  /** SHA-256 of the document. */
  readonly digest: Uint8Array;
  readonly epoch: number;
  readonly sequence: number;
  /** Of the sealed bundle; absent where it was put together in memory. */
  readonly bytes?: number;
}

/** Where a serving bundle finds what is planned for the inputs. */
export interface PlanSource {
  /** Fills (nu × H) standardised, NaN where nothing is planned, for the ticks after `tick`; returns whether anything is. */
  fill(model: Model, tick: number, out: Float64Array): boolean;
}

/** Forecasts of all signals, (ny × H) each, in units. */
export interface Paths {
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/** See the file head. Buffers are overwritten by each step. */
export class Serving implements Recorded {
  /** Replaced when the same document comes under a higher sequence. */
  checked: CheckedBundle;
  readonly model: Model;
  state: FilterState;
  bounds: Bounds;
  /** (nc) the tick's readings as lattice indices, NaN missing. */
  readonly lattice: Float64Array;
  /** (nc) the one-step forecasts made before the tick, in lattice steps. */
  readonly predicted: Float64Array;
  /** The filter sees every reading on its lattice, and so does the record. */
  readonly raw = null;
  /** (ny × H) in units. */
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  /** (nc) 1 where the tick's reading lay outside what the bundle folds in. */
  readonly isOutside: Uint8Array;
  /** null: ticks of the past are stepped through, and what was planned then is not known. */
  plans: PlanSource | null = null;
  /** (nc) readings are folded in on every 2^k-th step of the lattice, as the record keeps them (residuals/budget.ts). */
  readonly #coarseness: Uint8Array;
  /** (ny) standardised half-widths that bounds have at least, where the filter has gone astray; 0: as they are. */
  readonly least: Float64Array;
  /** Whether each signal's last reading is held in the place of forecasts. */
  isHolding = false;
  readonly #values: Float64Array;
  readonly #plan: Float64Array;
  #isPlanned = false;

  constructor(checked: CheckedBundle) {
    const { model } = checked;
    this.checked = checked;
    this.model = model;
    this.state = createState(model);
    this.bounds = createBounds(model);
    this.lattice = new Float64Array(model.channelCount);
    this.predicted = new Float64Array(model.channelCount);
    this.#coarseness = new Uint8Array(model.channelCount);
    this.#values = new Float64Array(model.channelCount);
    this.#plan = new Float64Array((model.channelCount - model.signalCount) * model.horizon);
    this.isOutside = new Uint8Array(model.channelCount);
    this.median = new Float64Array(model.signalCount * model.horizon);
    this.lower = new Float64Array(this.median.length);
    this.upper = new Float64Array(this.median.length);
    this.least = new Float64Array(model.signalCount);
  }

  /** One that only ever holds last readings, see `hold`. */
  static holding(checked: CheckedBundle): Serving {
    const serving = new Serving(checked);
    serving.isHolding = true;
    return serving;
  }

  /** The same bundle with a filter that starts anew. */
  afresh(): Serving {
    const after = new Serving(this.checked);
    after.plans = this.plans;
    return after;
  }

  /** Last tick folded in; -1 before the first. */
  get tick(): number {
    return this.state.tick;
  }

  get channelCount(): number {
    return this.model.channelCount;
  }

  get signalCount(): number {
    return this.model.signalCount;
  }

  get digest(): Uint8Array {
    return this.checked.digest;
  }

  indexOf(channel: number, value: number): number {
    return latticeIndex(value, this.model.latticeStep[channel]!, this.model.latticeOffset[channel]!);
  }

  get isWarming(): boolean {
    return this.isHolding || this.bounds.warmed < this.model.warmupTicks;
  }

  /** Expected size of the one-step residual in lattice steps (nc): what coder and decoder of segments start from. */
  residualScaleSteps(): Float64Array {
    const { residualScale, scale, latticeStep, channelCount } = this.model;
    const steps = new Float64Array(channelCount);
    for (let c = 0; c < channelCount; c++) steps[c] = (residualScale[c]! * scale[c]!) / latticeStep[c]!;
    return steps;
  }

  /** From the next tick on readings lie on every 2^k-th step of the lattice; at a segment's boundary alone. */
  coarsen(coarseness: Uint8Array): void {
    this.#coarseness.set(coarseness);
  }

  /** Folds one tick in: readings onto the lattice, forecast before, update, path, bounds. `readings` (nc) in units. */
  step(tick: number, readings: Float64Array): void {
    const { model, predicted, state } = this;
    predictNext(model, state, predicted);
    for (let c = 0; c < model.channelCount; c++) {
      predicted[c] = (predicted[c]! - model.latticeOffset[c]!) / model.latticeStep[c]!;
    }
    this.fold(tick, readings);
    this.replan();
    trackBounds(model, this.bounds, state, this.median);
  }

  /** The same without forecasts and bounds: for ticks of the past that come before those which settle the bounds. */
  fold(tick: number, readings: Float64Array): void {
    this.#lay(readings);
    update(this.model, this.state, tick, this.#values);
  }

  /** Readings onto the lattice. */
  #lay(readings: Float64Array): void {
    const { model, lattice } = this;
    for (let c = 0; c < model.channelCount; c++) {
      const step = model.latticeStep[c]!;
      const offset = model.latticeOffset[c]!;
      const index = latticeIndex(readings[c]!, step, offset);
      lattice[c] = Math.abs(index) <= MAX_INDEX ? coarseIndex(index, this.#coarseness[c]!) : Number.NaN;
      this.#values[c] = latticeValue(lattice[c]!, step, offset);
      this.isOutside[c] = this.#values[c]! < model.clipLow[c]! || this.#values[c]! > model.clipHigh[c]! ? 1 : 0;
    }
  }

  /** Forecasts anew from where the filter stands, under the plans of now; what was issued before is tracked as it was. */
  replan(): void {
    const { model, state, plans } = this;
    if (state.tick < 0 || this.isHolding) return;
    this.#isPlanned = plans?.fill(model, state.tick, this.#plan) ?? false;
    forecastPath(model, state, this.median, this.#isPlanned ? this.#plan : null);
  }

  /**
   * Forecasts into `out` under other plans than those that stand; afterwards everything is as before, to the bit.
   *
   * plan  (nu × H) standardised, NaN where nothing is planned: filled with what stands, for `change` to change
   * read  called while a kind's drawn paths are those of `out`; must not throw
   */
  whatIf(plan: Float64Array, change: (plan: Float64Array) => void, out: Paths, read: () => void): void {
    const { model, state, bounds } = this;
    if (this.#isPlanned) plan.set(this.#plan);
    else plan.fill(Number.NaN);
    change(plan);
    forecastPath(model, state, out.median, plan);
    intervalOf(model, bounds, state, out.median, out.lower, out.upper);
    read();
    // A kernel keeps the paths it drew last: they are again those of the forecast that stands.
    forecastPath(model, state, this.median, this.#isPlanned ? this.#plan : null);
  }

  /** Brings lower and upper to the present path. */
  computeBounds(): void {
    intervalOf(this.model, this.bounds, this.state, this.median, this.lower, this.upper);
    const { model, median, lower, upper, least } = this;
    for (let i = 0; i < least.length; i++) {
      const width = least[i]! * model.scale[i]!;
      if (width === 0) continue;
      for (let at = i * model.horizon; at < (i + 1) * model.horizon; at++) {
        lower[at] = Math.max(model.clipLow[i]!, Math.min(lower[at]!, median[at]! - width));
        upper[at] = Math.min(model.clipHigh[i]!, Math.max(upper[at]!, median[at]! + width));
      }
    }
  }

  get coarseness(): Uint8Array {
    return this.#coarseness;
  }

  /** Whether every number that is published of it is finite; a filter whose numbers are not has failed. */
  get isSound(): boolean {
    const { median, state } = this;
    let none = 0;
    for (let at = 0; at < median.length; at++) none += median[at]! - median[at]!;
    for (let at = 0; at < state.x.length; at++) none += state.x[at]! - state.x[at]!;
    for (let at = 0; at < state.value.length; at++) none += state.value[at]! - state.value[at]!;
    return none === 0;
  }

  /**
   * In the place of `step`, without any filter: each signal's last reading is its forecast, its mean before the first, and
   * bounds reach a usual spread or the widest half-width to either side. Never part of a record.
   */
  hold(tick: number, readings: Float64Array): void {
    const { model, state, bounds, median } = this;
    this.#lay(readings);
    state.tick = tick;
    for (let c = 0; c < model.channelCount; c++) {
      const z = (this.#values[c]! - model.mean[c]!) / model.scale[c]!;
      const isRead = Number.isFinite(z);
      state.observed[c] = isRead ? FOLDED : MISSING;
      state.age[c] = isRead ? 0 : Math.min(2 * fadeTicks(model), state.age[c]! + 1);
      if (!isRead) continue;
      state.value[c] = Math.min(state.high[c]!, Math.max(state.low[c]!, z));
      state.started[c] = 1;
    }
    for (let i = 0; i < model.signalCount; i++) {
      const [from, to] = [i * model.horizon, (i + 1) * model.horizon];
      median.fill(model.mean[i]! + model.scale[i]! * state.value[i]!, from, to);
      this.least[i] = bounds.spread[i]!;
      for (let at = from; at < to; at++) this.least[i] = Math.max(this.least[i]!, bounds.calibrated[at]!);
    }
  }

  /** Empty before the first tick: the desk then starts as we did. */
  savedState(): Uint8Array {
    return this.state.tick < 0 ? new Uint8Array(0) : saveState(this.model, this.state);
  }

  savedBounds(): Uint8Array {
    return saveBounds(this.model, this.bounds);
  }

  /** throws  FilterError 'snapshot' when they are another model's or damaged */
  restore(state: Uint8Array, bounds: Uint8Array): void {
    this.state = state.length === 0 ? createState(this.model) : restoreState(this.model, state);
    this.bounds = restoreBounds(this.model, bounds);
    this.replan();
  }
}
