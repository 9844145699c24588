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
import { type Expectation, type ExpectationMap, fewCurves, learnExpectation } from './expectation.ts';
import { impliedExpectation } from './implied-input.ts';
import { cutFolds, type PlanFolds } from './plan-folds.ts';
import { learnGains } from './plan-gains.ts';
import { gatherPlanOrigins, looksAt, type PlanOrigins } from './plan-origins.ts';
import { type RoundedExpectation, surprisesOf, unanswered } from './plan-surprise.ts';
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
/** An input that changed less often teaches nothing of what its changes bring. */
const LEAST_MOVES = 10;

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
  const moves = planned.map((u) => moveCount(series.values[model.signalCount + u], span));
  const moving = planned.filter((_, k) => moves[k] >= LEAST_MOVES);
  const names = (list: readonly number[]): string => list.map((u) => series.names[model.signalCount + u]).join(', ');
  const warnings = planned.flatMap((u, k) => {
    if (moves[k] >= LEAST_MOVES) return [];
    const often = moves[k] === 0 ? 'never moved' : `moved ${moves[k] === 1 ? 'once' : `only ${moves[k]} times`}`;
    return [
      `${names([u])}: ${often} while learning, so what a plan of it would bring is not known; plans are passed over.`,
    ];
  });
  if (moving.length === 0) return { response: null, warnings };
  const decays = responseDecays(model.horizon);
  const origins = gatherPlanOrigins(model, series, span, moving, decays.length + 2);
  const folds = cutFolds(origins.at, model.horizon);
  const bench: Bench = { model, origins, folds, planned: moving, decays };
  const found = [seenExpectation(bench), lastValue(bench)]
    .map((expected) => attempt(bench, expected))
    .reduce((best, one) => (geometricMean(one.ratio) < geometricMean(best.ratio) ? one : best));
  if (found.ratio.some((ratio) => ratio < 1)) return { response: found, warnings };
  const text = `${names(moving)}: knowing it ahead does not surely improve any forecast; plans are passed over.`;
  return { response: null, warnings: [...warnings, text] };
}

/** Times an input changed from one tick to the next. */
function moveCount(values: Float64Array, span: TickSpan): number {
  let moves = 0;
  for (let t = span.fromTick + 1; t < span.toTick; t++) if (Math.abs(values[t] - values[t - 1]) > 0) moves++;
  return moves;
}

/** What every attempt learns from. */
interface Bench {
  readonly model: Model;
  readonly origins: PlanOrigins;
  readonly folds: PlanFolds;
  readonly planned: readonly number[];
  readonly decays: readonly number[];
}

function seenExpectation({ model, origins, folds, planned }: Bench): ExpectationMap[] {
  return planned.map((_, k) => learnExpectation(origins, folds, k, planned.length, model.horizon));
}

/** Nothing but the last value: what remains where the state says nothing of an input. */
function lastValue({ model, origins, planned }: Bench): ExpectationMap[] {
  const q = origins.seenCount;
  return planned.map(() => ({ gram: new Float64Array(q * q), map: new Float64Array(q * model.horizon) }));
}

/** Behind what is expected, and then once more behind what the paths imply. */
function attempt(bench: Bench, expected: readonly ExpectationMap[]): Response {
  const { model, origins, folds, planned, decays } = bench;
  const first = answerTo(bench, roundedExpectation(bench, expected), null);
  if (first.response.ratio.every((ratio) => ratio === 1)) return first.response;
  const answer = { gain: first.response.model.gain, delay: first.response.model.delay, decays };
  const left = unanswered(origins, first.surprises, answer, model.signalCount, planned.length, model.horizon);
  const implied = expected.map((one, k) =>
    impliedExpectation(origins, folds, one, left, answer, k, planned.length, model.horizon),
  );
  if (implied.every((one, k) => one === expected[k])) return first.response;
  const second = answerTo(bench, roundedExpectation(bench, implied), first.response.model.delay).response;
  return geometricMean(second.ratio) < geometricMean(first.response.ratio) ? second : first.response;
}

/** Expectations of all inputs as they stand after rounding, and their tensors. */
interface Rounded extends RoundedExpectation {
  readonly tensors: Pick<ResponseTensors, 'readout' | 'basis'>;
}

function roundedExpectation({ model, origins, planned }: Bench, maps: readonly ExpectationMap[]): Rounded {
  const { horizon: H } = model;
  const q = origins.seenCount;
  const few = maps.map((map) => fewCurves(map, H, curvesFor(planned.length, H)));
  const curves = Math.max(...few.map((one) => one.curves));
  const rows = planned.length * curves;
  const stacked = (pick: (one: Expectation) => Float64Array, width: number): Float64Array => {
    const out = new Float64Array(rows * width);
    few.forEach((one, k) => void out.set(pick(one), k * curves * width));
    return out;
  };
  const tensors = {
    readout: quantiseTensor(
      stacked((one) => one.readout, q),
      rows,
      q,
      'i16',
    ),
    basis: quantiseTensor(
      stacked((one) => one.basis, H),
      rows,
      H,
      'i8',
    ),
  };
  return { curves, readout: dequantise(tensors.readout), basis: dequantise(tensors.basis), tensors };
}

/** Delays, unless given, and gains, behind the expectation as it stands after rounding. */
function answerTo(
  { model, origins, folds, planned, decays }: Bench,
  expectation: Rounded,
  known: Int32Array | null,
): { readonly response: Response; readonly surprises: Float64Array } {
  const { signalCount: ny, horizon: H } = model;
  const np = planned.length;
  const surprises = surprisesOf(model, origins, planned, expectation);
  const delay = known ?? findDelays(origins, surprises, ny, np, H, decays);
  const { gain, ratio } = learnGains(origins, folds, surprises, ny, np, H, decays, delay);
  const tensors: ResponseTensors = {
    inputs: [...planned],
    decays,
    delay: [...delay],
    gain: quantiseTensor(gain, ny, np * (decays.length + 2), 'i16'),
    looks: [...origins.looks],
    ...expectation.tensors,
    surprise: meanSizes(surprises, np, H),
  };
  return { surprises, response: { tensors, ratio, model: computable(tensors) } };
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
