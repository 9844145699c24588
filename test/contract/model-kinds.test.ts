/** What the filter promises of a model, held by every kind: finite, the same bits again, forecasts that agree, snapshots that hold. */
import { createHash } from 'node:crypto';
import {
  checkModel,
  createBounds,
  createState,
  crossing,
  forecastPath,
  intervalOf,
  type Model,
  PASSED_OVER,
  predictNext,
  restoreBounds,
  restoreState,
  STUCK,
  saveBounds,
  saveState,
  standsStill,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { EVERY_KIND, type KindName, modelOfKind, ROUND_TICKS, readingsOfKind } from '../support/every-kind.ts';

const FIRST_TICK = 29_000_000;
const TICKS = 320;
const models = new Map<KindName, Model>(EVERY_KIND.map((name) => [name, modelOfKind(name)]));
const hex = (bytes: Uint8Array): string =>
  Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength).toString('hex');
const bits = (values: Float64Array): string => hex(new Uint8Array(values.buffer, values.byteOffset, values.byteLength));

/** A filter with everything around it, as a gateway runs one. */
class Run {
  readonly model: Model;
  readonly predicted: Float64Array;
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  readonly plan: Float64Array;
  state;
  bounds;

  constructor(model: Model) {
    const size = model.signalCount * model.horizon;
    this.model = model;
    this.state = createState(model);
    this.bounds = createBounds(model);
    this.predicted = new Float64Array(model.channelCount);
    [this.median, this.lower, this.upper] = [new Float64Array(size), new Float64Array(size), new Float64Array(size)];
    this.plan = new Float64Array((model.channelCount - model.signalCount) * model.horizon).fill(1.5);
  }

  step(readings: Float64Array): void {
    const { model, state, bounds } = this;
    predictNext(model, state, this.predicted);
    update(model, state, state.tick < 0 ? FIRST_TICK : state.tick + 1, readings);
    this.forecast();
    trackBounds(model, bounds, state, this.median);
    intervalOf(model, bounds, state, this.median, this.lower, this.upper);
  }

  forecast(plan: Float64Array | null = null): void {
    forecastPath(this.model, this.state, this.median, plan);
  }

  /** Chance and time of crossing two limits of the first signal, above and below what it usually is. */
  crossings(): unknown[] {
    const { model, bounds, state, median } = this;
    return ([1, -1] as const).map((side) =>
      crossing(model, bounds, state, median, 0, model.mean[0]! + side * model.scale[0]!, side > 0 ? 'above' : 'below'),
    );
  }

  /** Everything that goes out or is kept, to the bit. */
  picture(): string {
    const { predicted, median, lower, upper, model } = this;
    const parts = [...[predicted, median, lower, upper].map(bits), hex(this.savedState())];
    return createHash('sha256')
      .update([...parts, hex(saveBounds(model, this.bounds))].join())
      .digest('hex');
  }

  savedState(): Uint8Array {
    return saveState(this.model, this.state);
  }

  /** Stopped, and started again from what it saved. */
  restart(): void {
    this.state = restoreState(this.model, this.savedState());
    this.bounds = restoreBounds(this.model, saveBounds(this.model, this.bounds));
  }
}

describe.each(EVERY_KIND)('%s', (name) => {
  const model = models.get(name)!;
  const readings = readingsOfKind(name, model, TICKS, 11);

  test('passes the check of models', () => {
    expect(() => checkModel(model)).not.toThrow();
  });

  test('two filters give the same bits, a silence, spikes and a hanging sensor among the readings', () => {
    const [one, other] = [new Run(model), new Run(model)];
    let passedOver = 0;
    let stuck = 0;
    for (const row of readings) {
      one.step(row);
      other.step(row);
      expect(one.picture()).toBe(other.picture());
      for (const path of [one.predicted, one.median, one.lower, one.upper])
        expect(path.every(Number.isFinite)).toBe(true);
      passedOver += one.state.observed.filter((value) => value === PASSED_OVER).length;
      stuck += one.state.observed.filter((value) => value === STUCK).length;
    }
    // Else the readings are not as rough as they should be.
    if (name !== 'switched') expect(passedOver).toBeGreaterThan(0);
    if (model.stuck !== undefined) expect(stuck).toBeGreaterThan(0);
  });

  test('what is forecast of the next tick is step 1 of the path without a plan, but for a signal that hangs', () => {
    const run = new Run(model);
    for (const row of readings) {
      run.step(row);
      predictNext(model, run.state, run.predicted);
      for (let i = 0; i < model.signalCount; i++) {
        // Its path leans on the standing reading; what replaces that reading in the filter must not.
        if (model.stuck?.acts === true && standsStill(model, run.state, i)) continue;
        expect(run.median[i * model.horizon]).toBe(run.predicted[i]);
      }
    }
  });

  test('a plan changes neither what is forecast of the next tick nor the snapshot', () => {
    const [plain, planned] = [new Run(model), new Run(model)];
    let changed = 0;
    for (const row of readings) {
      plain.step(row);
      planned.step(row);
      planned.forecast(planned.plan);
      if (bits(planned.median) !== bits(plain.median)) changed++;
      expect(hex(planned.savedState())).toBe(hex(plain.savedState()));
      planned.forecast();
      expect(planned.picture()).toBe(plain.picture());
    }
    if (model.response !== undefined || name === 'driven') expect(changed).toBeGreaterThan(TICKS / 2);
    else expect(changed).toBe(0);
  });

  test('a snapshot of any tick goes on to the same bits', () => {
    const whole = new Run(model);
    const pictures: string[] = [];
    const broken = new Run(model);
    broken.restart();
    for (const [n, row] of readings.entries()) {
      whole.step(row);
      pictures.push(whole.picture());
      broken.step(row);
      expect(broken.picture(), `tick ${n}`).toBe(pictures[n]);
      broken.restart();
      expect(hex(broken.savedState())).toBe(hex(whole.savedState()));
      broken.forecast();
      expect(bits(broken.median)).toBe(bits(whole.median));
      if (n % 8 === 0) expect(broken.crossings()).toEqual(whole.crossings());
    }
  });

  test('a snapshot from before the first reading, or of a channel never read, goes on to the same bits', () => {
    const whole = new Run(model);
    const broken = new Run(model);
    const none = new Float64Array(model.channelCount).fill(Number.NaN);
    for (let n = 0; n < ROUND_TICKS + 5; n++) {
      const row = n < 3 ? none : readings[n]!.map((value, c) => (c === 0 && n < 20 ? Number.NaN : value));
      whole.step(row);
      broken.step(row);
      expect(broken.picture()).toBe(whole.picture());
      broken.restart();
    }
  });

  test('without readings every signal fades to its seasonal mean, within the clips all the way', () => {
    const run = new Run(model);
    for (const row of readings.slice(0, 180)) run.step(row);
    const none = new Float64Array(model.channelCount).fill(Number.NaN);
    const { signalCount: ny, horizon: H, seasonalBins: bins, seasonalPeriod: period } = model;
    for (let n = 0; n < 3 * Math.max(H, 8) + 2; n++) {
      run.step(none);
      const isInside = (value: number, k: number): boolean =>
        value >= model.clipLow[Math.floor(k / H)]! && value <= model.clipHigh[Math.floor(k / H)]!;
      expect(run.median.every(isInside)).toBe(true);
    }
    for (let i = 0; i < ny; i++) {
      for (let h = 1; h <= H; h++) {
        const bin = period === 0 ? 0 : Math.floor((((run.state.tick + h) % period) * bins) / period);
        const mean = model.mean[i]! + model.scale[i]! * model.seasonal[i * bins + bin]!;
        expect(run.median[i * H + h - 1]).toBeCloseTo(
          Math.min(model.clipHigh[i]!, Math.max(model.clipLow[i]!, mean)),
          9,
        );
      }
    }
  });

  test('a damaged snapshot is refused', () => {
    const run = new Run(model);
    for (const row of readings.slice(0, 50)) run.step(row);
    const bytes = run.savedState();
    for (let at = 0; at < bytes.length; at += Math.max(1, Math.floor(bytes.length / 40))) {
      const damaged = bytes.slice();
      damaged[at]! ^= 0x10;
      expect(() => restoreState(model, damaged)).toThrow(/state snapshot, /);
    }
    expect(() => restoreState(model, bytes.subarray(0, bytes.length - 1))).toThrow(/length/);
  });

  test('snapshots of other kinds and other models are refused', () => {
    const others = EVERY_KIND.filter((other) => other !== name);
    const own = new Run(model);
    for (const other of others) {
      const run = new Run(models.get(other)!);
      expect(() => restoreState(model, run.savedState()), other).toThrow(/state snapshot, /);
      expect(() => restoreBounds(model, saveBounds(run.model, run.bounds)), other).toThrow(/bounds snapshot, /);
    }
    if (name === 'switched') return;
    const sibling = new Run(modelOfKind(name, { horizon: 25 }));
    expect(() => restoreState(model, sibling.savedState())).toThrow(/model: expected the model given/);
    expect(() => restoreState(model, own.savedState())).not.toThrow();
  });
});
