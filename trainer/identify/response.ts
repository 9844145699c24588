/**
 * Learning what plans of the inputs bring, as a second stage behind any kind of model: what the path without a plan missed,
 * regressed on the surprise of a perfect plan run through a few fixed filters. A signal takes part only where it surely
 * gains on rolling origins; where none does there is no response, and a plan changes nothing.
 */
import { dequantise, quantiseTensor, type ResponseTensors } from '@stillwell/protocol';
import type { Model, ResponseModel } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { findDelays } from './dead-time.ts';
import { type Expectation, learnExpectation } from './expectation.ts';
import { cutFolds, type PlanFolds } from './plan-folds.ts';
import { learnGains } from './plan-gains.ts';
import { gatherPlanOrigins, looksAt, type PlanOrigins } from './plan-origins.ts';
import { surprisesOf } from './plan-surprise.ts';
import { geometricMean } from './sure-gain.ts';

/** What plans bring, as the bundle holds it and ready to compute with. */
export interface Response {
  readonly tensors: ResponseTensors;
  readonly model: ResponseModel;
  /** (ny) squared error under a perfect plan over that without one, on rolling origins; 1 where plans do not help. */
  readonly ratio: readonly number[];
}

/** A response, or why there is none. */
export interface ResponseFound {
  readonly response: Response | null;
  readonly warnings: readonly string[];
}

const FASTEST = 1.5;
/** Curves of an expectation at most, and bytes that all of them may take. */
const MOST_CURVES = 8;
const CURVE_BYTES = 3072;
/** States of any kind at most. */
const MOST_STATES = 128;
/** An input that departs from what is expected at fewer origins than this teaches nothing. */
const LEAST_MOVING = 20;

/**
 * Poles that double from a tick and a half up to twice the horizon.
 *
 * shapes  result (nb)
 * units   decay per tick
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function responseDecays(horizon: number): number[] {
  const decays: number[] = [];
  for (let tau = FASTEST; tau <= Math.max(FASTEST, 2 * horizon); tau *= 2) decays.push(Math.exp(-1 / tau));
  return decays;
}

/**
 * Bytes of the document to keep free for a response, at most.
 *
 * shapes  features of a channel's own past
 * units   bytes
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function responseRoom(signalCount: number, planned: number, horizon: number, features: number): number {
  if (planned === 0) return 0;
  const filters = responseDecays(horizon).length + 2;
  const curves = curvesFor(planned, horizon);
  // Names, scales and lists of whole numbers are rounded up.
  const seen = MOST_STATES + signalCount * looksAt(horizon, signalCount).length + features;
  const readout = planned * curves * (2 * seen + 4);
  const basis = planned * curves * (horizon + 4);
  return (
    400 + 9 * filters + signalCount * planned * (2 * filters + 3) + 4 * signalCount + readout + basis + 9 * planned
  );
}

function curvesFor(planned: number, horizon: number): number {
  return Math.max(1, Math.min(MOST_CURVES, Math.floor(CURVE_BYTES / (planned * horizon))));
}

/**
 * Learns the response.
 *
 * shapes  span of indices into the series to learn from; planned counted from the first input, ascending
 * units   standardised
 * throws  FilterError if the model does not fit the series; TrainError 'fit' from the solves
 * source  residual regression: Frisch & Waugh, Econometrica 1 (1933), on what past and input have left of each other
 * cost    one replay, and a few regressions on some thousand origins
 */
export function learnResponse(model: Model, series: Series, span: TickSpan, planned: readonly number[]): ResponseFound {
  const moving = planned.filter((u) => moves(model, series, span, u));
  const names = (list: readonly number[]): string => list.map((u) => series.names[model.signalCount + u]).join(', ');
  const still = planned.filter((u) => !moving.includes(u));
  const warnings =
    still.length === 0
      ? []
      : [
          `${names(still)}: never moved while learning, so what a plan of it would bring is not known; plans are passed over.`,
        ];
  if (moving.length === 0) return { response: null, warnings };
  const decays = responseDecays(model.horizon);
  const origins = gatherPlanOrigins(model, series, span, moving, decays.length + 2);
  const folds = cutFolds(origins.at, model.horizon);
  const found = [seenExpectation, lastValue]
    .map((expect) =>
      attempt(model, origins, folds, moving, decays, expect(origins, folds, moving.length, model.horizon)),
    )
    .reduce((best, one) => (geometricMean(one.ratio) < geometricMean(best.ratio) ? one : best));
  if (found.ratio.some((ratio) => ratio < 1)) return { response: found, warnings };
  const text = `${names(moving)}: knowing it ahead does not surely improve any forecast; plans are passed over.`;
  return { response: null, warnings: [...warnings, text] };
}

function moves(model: Model, series: Series, span: TickSpan, u: number): boolean {
  const values = series.values[model.signalCount + u];
  let moving = 0;
  for (let t = span.fromTick + 1; t < span.toTick && moving < LEAST_MOVING; t++) {
    if (Math.abs(values[t] - values[t - 1]) > 0) moving++;
  }
  return moving >= LEAST_MOVING;
}

function seenExpectation(origins: PlanOrigins, folds: PlanFolds, planned: number, horizon: number): Expectation[] {
  const most = curvesFor(planned, horizon);
  return Array.from({ length: planned }, (_, k) => learnExpectation(origins, folds, k, planned, horizon, most));
}

/** Nothing but the last value: what remains where the state says nothing of an input. */
function lastValue(origins: PlanOrigins, _: PlanFolds, planned: number, horizon: number): Expectation[] {
  return Array.from({ length: planned }, () => ({
    curves: 1,
    readout: new Float64Array(origins.seenCount),
    basis: new Float64Array(horizon),
  }));
}

function attempt(
  model: Model,
  origins: PlanOrigins,
  folds: PlanFolds,
  planned: readonly number[],
  decays: readonly number[],
  expectations: readonly Expectation[],
): Response {
  const { signalCount: ny, horizon: H } = model;
  const np = planned.length;
  const curves = Math.max(...expectations.map((expectation) => expectation.curves));
  const stacked = (pick: (one: Expectation) => Float64Array, width: number): Float64Array => {
    const out = new Float64Array(np * curves * width);
    expectations.forEach((one, k) => void out.set(pick(one), k * curves * width));
    return out;
  };
  const readout = quantiseTensor(
    stacked((one) => one.readout, origins.seenCount),
    np * curves,
    origins.seenCount,
    'i16',
  );
  const basis = quantiseTensor(
    stacked((one) => one.basis, H),
    np * curves,
    H,
    'i8',
  );
  // Gains are learned behind the expectation as it stands after rounding.
  const rounded = { readout: dequantise(readout), basis: dequantise(basis), curves };
  const surprises = surprisesOf(model, origins, planned, rounded);
  const delay = findDelays(origins, surprises, ny, np, H, decays);
  const { gain, ratio } = learnGains(origins, folds, surprises, ny, np, H, decays, delay);
  const tensors: ResponseTensors = {
    inputs: [...planned],
    decays,
    delay: [...delay],
    gain: quantiseTensor(gain, ny, np * (decays.length + 2), 'i16'),
    looks: [...origins.looks],
    readout,
    basis,
    surprise: meanSizes(surprises, np, H),
  };
  return { tensors, ratio, model: computable(tensors) };
}

/** Ready to compute with, as the gateway will make it of the bundle. */
function computable(tensors: ResponseTensors): ResponseModel {
  return {
    inputs: Int32Array.from(tensors.inputs),
    decays: Float64Array.from(tensors.decays),
    delay: Int32Array.from(tensors.delay),
    gain: dequantise(tensors.gain),
    looks: Int32Array.from(tensors.looks),
    readout: dequantise(tensors.readout),
    basis: dequantise(tensors.basis),
    surprise: Float64Array.from(tensors.surprise),
  };
}

function meanSizes(surprises: Float64Array, planned: number, horizon: number): number[] {
  const sums = new Array<number>(planned).fill(0);
  for (let k = 0; k < surprises.length; k++) sums[Math.floor(k / horizon) % planned] += Math.abs(surprises[k]);
  return sums.map((sum) => (sum * planned) / Math.max(1, surprises.length));
}
