/**
 * What a plan of the inputs adds to a path that was made without one. The path holds already what the past says of the
 * inputs to come; so only the surprise of a plan acts, plan less what was expected, and a plan that says no more than
 * was expected changes nothing.
 *
 *   expected     û(t+h) = u(t) + Σ_k basis[k, h−1] · (readout · q)_k      q: predictive state, path − now at some steps,
 *                the input's own features where the kind keeps them
 *   surprise     s(h) = plan(t+h) − û(t+h); 0 before the plan begins, its last value behind its end
 *   filters      s(h) itself; e_b(h) = a_b e_b(h−1) + (1 − a_b) s(h), e_b(0) = 0; and Σ_{k ≤ h} s(k) / H, for what fills up
 *   response     path_i(t+h) += Σ gain · filter(h − delay)
 *
 * A linear stage behind any kind of model; a kind that carries plans through its own recursion has none.
 */
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { requireEach, requireField, requireLength, requireWeights } from './requirement.ts';
import type { FilterState } from './state.ts';

/**
 * The response to plans, ready to compute with.
 *
 * shapes  np planned inputs, nb poles, r curves, S looks, ny signals, d order, F features a channel, H horizon; row-major
 * units   standardised
 */
export interface ResponseModel {
  /** (np) which inputs, counted from the first input; ascending. */
  readonly inputs: Int32Array;
  /** (nb) poles of the filters, per tick. */
  readonly decays: Float64Array;
  /** (ny × np) ticks before an input shows in a signal. */
  readonly delay: Int32Array;
  /** (ny × np·(nb + 2)) direct, poles in order, running sum. */
  readonly gain: Float64Array;
  /** (S) steps at which the paths are looked at, ascending. */
  readonly looks: Int32Array;
  /** (np·r × (d + ny·S + F)) */
  readonly readout: Float64Array;
  /** (np·r × H) */
  readonly basis: Float64Array;
  /** (np) mean size of the surprise over the horizon when nothing was planned: what a plan is worth at most. */
  readonly surprise: Float64Array;
}

/** Buffers of one state; see `ResponseModel`. */
export interface ResponseBuffers {
  /** (d + ny·S + F) */
  readonly seen: Float64Array;
  /** (r) */
  readonly coefficients: Float64Array;
  /** (H) each */
  readonly expected: Float64Array;
  readonly surprise: Float64Array;
  readonly filtered: Float64Array;
}

/**
 * Features of a channel's own past that the model keeps; 0 in kinds without.
 *
 * units   a count
 */
export function ownFeatureCount(model: Model): number {
  return kernelOf(model).own?.count(model) ?? 0;
}

/** What is looked at is held within this, so that no past whatever makes an expectation that is not finite. */
const SEEN_LIMIT = 1000;

/**
 * All buffers there will ever be.
 *
 * shapes  as ResponseBuffers
 */
export function createResponseBuffers(model: Model, response: ResponseModel): ResponseBuffers {
  const { horizon: H } = model;
  return {
    seen: new Float64Array(seenCount(response, H)),
    coefficients: new Float64Array(curveCount(response, H)),
    expected: new Float64Array(H),
    surprise: new Float64Array(H),
    filtered: new Float64Array(H),
  };
}

/** Numbers that expectations are read from. */
function seenCount(response: ResponseModel, horizon: number): number {
  return response.readout.length / (response.inputs.length * curveCount(response, horizon));
}

function curveCount({ basis, inputs }: ResponseModel, horizon: number): number {
  return basis.length / (inputs.length * horizon);
}

/**
 * Refuses a response that cannot be computed with.
 *
 * throws  FilterError 'model'
 */
export function checkResponse(model: Model, response: ResponseModel): void {
  const { inputs, decays, delay, gain, looks, readout, basis, surprise } = response;
  const { signalCount: ny, horizon: H } = model;
  const np = inputs.length;
  requireField(np > 0, 'response.inputs', 'at least one', np);
  ascending(inputs, 'inputs', 0, model.channelCount - ny - 1);
  ascending(looks, 'looks', 1, H);
  requireEach(decays, 'response.decays', (value) => value > 0 && value < 1, 'more than 0 and less than 1');
  requireLength(delay, 'response.delay', ny * np);
  for (let k = 0; k < delay.length; k++)
    requireField(delay[k] >= 0 && delay[k] < H, `response.delay[${k}]`, `0 to ${H - 1}`, delay[k]);
  requireLength(gain, 'response.gain', ny * np * (decays.length + 2));
  const r = curveCount(response, H);
  requireField(Number.isInteger(r) && r > 0, 'response.basis', 'as many curves for each input', basis.length);
  requireLength(readout, 'response.readout', np * r * (model.order + ny * looks.length + ownFeatureCount(model)));
  requireLength(surprise, 'response.surprise', np);
  requireEach(surprise, 'response.surprise', (value) => value >= 0 && value <= 1e60, 'a finite number, zero or more');
  for (const name of ['gain', 'readout', 'basis'] as const) requireWeights(response[name], `response.${name}`);
}

function ascending(values: Int32Array, name: string, low: number, high: number): void {
  for (let k = 0; k < values.length; k++) {
    const least = k === 0 ? low : values[k - 1] + 1;
    const isGood = values[k] >= least && values[k] <= high;
    requireField(isGood, `response.${name}[${k}]`, `ascending, ${least} to ${high}`, values[k]);
  }
}

/**
 * Notes what inputs are expected from: the predictive state, and how far the paths lead from now.
 *
 * shapes  paths (ny × H) as made without a plan; fills buffers.seen but for the last F
 * cost    O(d + ny · S); allocates nothing
 */
export function lookAtPaths(
  model: CommonModel,
  response: ResponseModel,
  buffers: ResponseBuffers,
  state: FilterState,
  paths: Float64Array,
): void {
  const { seen } = buffers;
  const { horizon: H, order: d } = model;
  const S = response.looks.length;
  for (let k = 0; k < d; k++) seen[k] = state.x[k];
  for (let i = 0; i < model.signalCount; i++) {
    for (let k = 0; k < S; k++) seen[d + i * S + k] = paths[i * H + response.looks[k] - 1] - state.value[i];
  }
  for (let k = 0; k < d + model.signalCount * S; k++) seen[k] = Math.min(SEEN_LIMIT, Math.max(-SEEN_LIMIT, seen[k]));
}

/**
 * Notes the own features of one planned input; after `lookAtPaths`.
 *
 * shapes  which 0 … np − 1; fills the last F of buffers.seen
 * cost    O(F); allocates nothing
 */
export function lookAtInput(
  model: Model,
  response: ResponseModel,
  buffers: ResponseBuffers,
  state: FilterState,
  which: number,
): void {
  const own = kernelOf(model).own;
  if (own === undefined) return;
  const { seen } = buffers;
  const F = own.count(model);
  const features = own.features(state.core);
  const from = (model.signalCount + response.inputs[which]) * F;
  const at = seen.length - F;
  for (let k = 0; k < F; k++) seen[at + k] = Math.min(SEEN_LIMIT, Math.max(-SEEN_LIMIT, features[from + k]));
}

/**
 * What the past says of one planned input; after `lookAtPaths`.
 *
 * shapes  which 0 … np − 1; fills buffers.expected (H), and the last F of buffers.seen
 * units   standardised, inside the input's clips
 * cost    O(r · (d + ny · S + F + H)); allocates nothing
 */
export function expectInput(
  model: Model,
  response: ResponseModel,
  buffers: ResponseBuffers,
  state: FilterState,
  which: number,
): void {
  lookAtInput(model, response, buffers, state, which);
  const { seen, coefficients, expected } = buffers;
  const { readout, basis } = response;
  const H = model.horizon;
  const r = coefficients.length;
  const width = seen.length;
  for (let k = 0; k < r; k++) {
    let sum = 0;
    const row = (which * r + k) * width;
    for (let j = 0; j < width; j++) sum += readout[row + j] * seen[j];
    coefficients[k] = sum;
  }
  const channel = model.signalCount + response.inputs[which];
  const now = state.value[channel];
  const low = state.low[channel];
  const high = state.high[channel];
  for (let h = 0; h < H; h++) {
    let sum = now;
    for (let k = 0; k < r; k++) sum += basis[(which * r + k) * H + h] * coefficients[k];
    expected[h] = Math.min(high, Math.max(low, sum));
  }
}

/**
 * Adds the response to a plan to paths made without one, in place.
 *
 * shapes  plan (nu × H), NaN where nothing is planned; paths (ny × H)
 * units   standardised
 * cost    O(np · nb · ny · H); allocates nothing
 */
export function respond(
  model: Model,
  response: ResponseModel,
  buffers: ResponseBuffers,
  state: FilterState,
  plan: Float64Array,
  paths: Float64Array,
): void {
  const H = model.horizon;
  lookAtPaths(model, response, buffers, state, paths);
  for (let which = 0; which < response.inputs.length; which++) {
    if (!isPlanned(plan, response.inputs[which] * H, H)) continue;
    expectInput(model, response, buffers, state, which);
    surpriseOf(model, response, buffers, state, plan, which);
    for (let b = 0; b < response.decays.length + 2; b++) {
      filterSurprise(response, buffers, b);
      addFiltered(model, response, buffers.filtered, which, b, paths);
    }
  }
}

function isPlanned(plan: Float64Array, at: number, count: number): boolean {
  // y − y is 0 for finite y alone.
  for (let k = at; k < at + count; k++) if (plan[k] - plan[k] === 0) return true;
  return false;
}

/** Fills buffers.surprise from buffers.expected. */
function surpriseOf(
  model: CommonModel,
  response: ResponseModel,
  buffers: ResponseBuffers,
  state: FilterState,
  plan: Float64Array,
  which: number,
): void {
  const { expected, surprise } = buffers;
  const H = model.horizon;
  const channel = model.signalCount + response.inputs[which];
  const low = state.low[channel];
  const high = state.high[channel];
  const at = response.inputs[which] * H;
  let last = 0;
  for (let h = 0; h < H; h++) {
    const planned = plan[at + h];
    if (planned - planned === 0) last = Math.min(high, Math.max(low, planned)) - expected[h];
    surprise[h] = last;
  }
}

/** Fills buffers.filtered with filter b of the surprise: direct, poles in order, running sum. */
function filterSurprise(response: ResponseModel, buffers: ResponseBuffers, b: number): void {
  const { surprise, filtered } = buffers;
  const H = surprise.length;
  const nb = response.decays.length;
  let memory = 0;
  for (let h = 0; h < H; h++) {
    if (b === 0) memory = surprise[h];
    else if (b <= nb) memory = response.decays[b - 1] * memory + (1 - response.decays[b - 1]) * surprise[h];
    else memory += surprise[h] / H;
    filtered[h] = memory;
  }
}

function addFiltered(
  model: CommonModel,
  response: ResponseModel,
  filtered: Float64Array,
  which: number,
  b: number,
  paths: Float64Array,
): void {
  const H = model.horizon;
  const np = response.inputs.length;
  const filters = response.decays.length + 2;
  for (let i = 0; i < model.signalCount; i++) {
    const gain = response.gain[(i * np + which) * filters + b];
    if (gain === 0) continue;
    const delay = response.delay[i * np + which];
    for (let h = delay; h < H; h++) paths[i * H + h] += gain * filtered[h - delay];
  }
}
