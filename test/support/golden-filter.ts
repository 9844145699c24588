/** A filter run in a form that can be frozen: model and readings as plain numbers, every output as the hex of its bits. */
import {
  createBounds,
  createState,
  crossing,
  forecastPath,
  intervalOf,
  type Model,
  predictNext,
  saveBounds,
  saveState,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';

/** Arrays stand as lists; readings are lattice indices by tick and channel, null where missing. */
export interface GoldenInput {
  readonly model: Readonly<Record<string, number | string | boolean | readonly number[]>>;
  readonly firstTick: number;
  readonly readings: readonly (readonly (number | null)[])[];
}

/** Hex of float64, big-endian, one string a tick, channels after one another. */
export interface GoldenOutput {
  readonly predictions: readonly string[];
  readonly innovations: readonly string[];
  /** Median, lower, upper of every 50th tick. */
  readonly intervals: readonly string[];
  /** Probability that signal 0 rises past its mean by one scale, every 50th tick. */
  readonly crossings: readonly string[];
  readonly state: string;
  readonly boundsTail: string;
}

/** The model as the filter takes it. */
export function modelOf(input: GoldenInput): Model {
  const entries = Object.entries(input.model).map(([name, value]) => {
    if (!Array.isArray(value)) return [name, value];
    return [name, name === 'lags' ? Int32Array.from(value) : Float64Array.from(value)];
  });
  return Object.fromEntries(entries) as unknown as Model;
}

const hex = (values: Float64Array): string => {
  const view = new DataView(new ArrayBuffer(8 * values.length));
  values.forEach((value, k) => {
    view.setFloat64(8 * k, value);
  });
  return Buffer.from(view.buffer).toString('hex');
};

/** Runs the filter over the readings. */
export function goldenRun(input: GoldenInput): GoldenOutput {
  const model = modelOf(input);
  const state = createState(model);
  const bounds = createBounds(model);
  const size = model.signalCount * model.horizon;
  const [median, lower, upper] = [new Float64Array(size), new Float64Array(size), new Float64Array(size)];
  const next = new Float64Array(model.channelCount);
  const predictions: string[] = [];
  const innovations: string[] = [];
  const intervals: string[] = [];
  const crossings: string[] = [];
  input.readings.forEach((row, n) => {
    predictNext(model, state, next);
    predictions.push(hex(next));
    const readings = Float64Array.from(row, (k, c) =>
      k === null ? Number.NaN : model.latticeOffset[c] + k * model.latticeStep[c],
    );
    update(model, state, input.firstTick + n, readings);
    innovations.push(hex(state.innovation.map((e) => (Number.isNaN(e) ? 0 : e))));
    forecastPath(model, state, median);
    trackBounds(model, bounds, state, median);
    if (n % 50 !== 49) return;
    intervalOf(model, bounds, state, median, lower, upper);
    intervals.push(hex(median) + hex(lower) + hex(upper));
    const limit = model.mean[0] + model.scale[0];
    crossings.push(hex(Float64Array.of(crossing(model, bounds, state, median, 0, limit, 'above').probability)));
  });
  const last = saveBounds(model, bounds);
  return {
    predictions,
    innovations,
    intervals,
    crossings,
    state: Buffer.from(saveState(model, state)).toString('hex'),
    boundsTail: Buffer.from(last.subarray(last.length - 4)).toString('hex'),
  };
}
