/**
 * Replayed origins for learning what plans of the inputs bring: at each, what the model saw, what the planned inputs then
 * did, and what its path without a plan missed. Thinned, since neighbours say nearly the same.
 */
import { lookAtInput, type Model, ownFeatureCount, type ResponseModel } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { replayPaths } from '../judge/replay.ts';
import type { TickSpan } from '../span.ts';

/**
 * shapes  n origins; q numbers seen, np planned inputs, S steps judged, ny signals, H horizon
 * units   standardised
 */
export interface PlanOrigins {
  readonly count: number;
  /** S steps, about evenly spread on a logarithmic axis: every step then weighs 1/h. */
  readonly steps: readonly number[];
  /** Steps at which paths are looked at. */
  readonly looks: readonly number[];
  /** (n) index into the series */
  readonly at: Int32Array;
  /** (n × np·q) for each input: state, paths, its own features */
  readonly seen: Float64Array;
  readonly seenCount: number;
  /** (n × np) value at the origin */
  readonly now: Float64Array;
  /** (n × np·H) value at each step; a missing reading holds the last, as commands do */
  readonly future: Float64Array;
  /** (n × ny·S) reading less path, NaN where missing */
  readonly missed: Float64Array;
}

const MOST_ORIGINS = 4000;
/** Numbers kept of the inputs' futures at most. */
const MOST_FUTURES = 4_000_000;
/** Products of the last regression at most: sites of many signals get fewer origins. */
const MOST_PRODUCTS = 2e9;
const STEPS = 12;
/** Looks at one signal's path, and at all of them together. */
const MOST_LOOKS = 10;
const ALL_LOOKS = 40;

/**
 * Replays a model without a plan over a span and keeps what a plan could have told.
 *
 * shapes  span of indices into the series; planned counted from the first input
 * units   standardised
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    one replay
 */
export function gatherPlanOrigins(
  model: Model,
  series: Series,
  span: TickSpan,
  planned: readonly number[],
  filterCount: number,
): PlanOrigins {
  const { signalCount: ny, horizon: H } = model;
  const np = planned.length;
  const steps = spread(H, STEPS);
  const looks = looksAt(H, ny);
  const products = ny * steps.length * (np * filterCount) ** 2;
  const most = Math.max(64, Math.min(MOST_ORIGINS, MOST_FUTURES / (np * H), MOST_PRODUCTS / products));
  const indices = usableOrigins(series, span, H, most);
  const looking = { ...model, response: lookingResponse(model, planned, looks) };
  const inputs = planned.map((u) => standardised(model, series, ny + u));
  const signals = Array.from({ length: ny }, (_, i) => clipped(model, series.values[i], i));
  const seenCount = model.order + ny * looks.length + ownFeatureCount(model);
  const out: PlanOrigins = {
    count: indices.length,
    steps,
    looks,
    at: indices,
    seen: new Float64Array(indices.length * np * seenCount),
    seenCount,
    now: new Float64Array(indices.length * np),
    future: new Float64Array(indices.length * np * H),
    missed: new Float64Array(indices.length * ny * steps.length),
  };
  let next = 0;
  const nothing = (_: number, plan: Float64Array): void => void plan.fill(Number.NaN);
  replayPaths(
    looking,
    series,
    span,
    ({ at, state, median }) => {
      if (next >= indices.length || at !== indices[next]) return;
      const n = next++;
      inputs.forEach((z, k) => {
        if (state.response !== null) {
          lookAtInput(looking, looking.response, state.response, state, k);
          out.seen.set(state.response.seen, (n * np + k) * seenCount);
        }
        out.now[n * np + k] = state.value[ny + planned[k]];
        out.future.set(z.subarray(at + 1, at + 1 + H), (n * np + k) * H);
      });
      for (let i = 0; i < ny; i++) {
        steps.forEach((h, s) => {
          out.missed[(n * ny + i) * steps.length + s] = (signals[i][at + h] - median[i * H + h - 1]) / model.scale[i];
        });
      }
    },
    { planner: nothing },
  );
  return out;
}

/**
 * The first step, the last, and others between, about evenly on a logarithmic axis.
 *
 * shapes  result ascending, at most `count`, fewer where steps would coincide
 * units   steps
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
function spread(horizon: number, count: number): number[] {
  const steps = new Set<number>([1, horizon]);
  for (let k = 1; k < count - 1; k++) steps.add(Math.round(horizon ** (k / (count - 1))));
  return [...steps].sort((a, b) => a - b);
}

/**
 * Steps at which the paths of so many signals are looked at: none where two a signal would already be too many.
 *
 * shapes  result ascending
 * units   steps
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function looksAt(horizon: number, signalCount: number): number[] {
  const each = Math.min(MOST_LOOKS, Math.floor(ALL_LOOKS / signalCount));
  return each < 2 ? [] : spread(horizon, each);
}

/** Evenly thinned origins whose whole future lies in the span and in time that may teach. */
function usableOrigins({ excluded }: Series, span: TickSpan, horizon: number, most: number): Int32Array {
  const isExcluded = excluded?.isExcluded;
  const usable: number[] = [];
  let nextExcluded = Number.POSITIVE_INFINITY;
  for (let t = span.toTick - 1; t >= span.fromTick; t--) {
    if (isExcluded?.[t] === 1) nextExcluded = t;
    if (t + horizon < Math.min(span.toTick, nextExcluded)) usable.push(t);
  }
  const every = Math.max(1, Math.ceil(usable.length / most));
  return Int32Array.from(usable.reverse().filter((_, k) => k % every === 0));
}

/** A response that only looks. */
function lookingResponse(model: Model, planned: readonly number[], looks: readonly number[]): ResponseModel {
  const { signalCount: ny, horizon: H } = model;
  const np = planned.length;
  return {
    inputs: Int32Array.from(planned),
    decays: new Float64Array(0),
    delay: new Int32Array(ny * np),
    gain: new Float64Array(ny * np * 2),
    looks: Int32Array.from(looks),
    readout: new Float64Array(np * (model.order + ny * looks.length + ownFeatureCount(model))),
    basis: new Float64Array(np * H),
    surprise: new Float64Array(np),
  };
}

/** Held over missing readings and inside the clips, as the filter takes a plan. */
function standardised(model: Model, series: Series, channel: number): Float64Array {
  let last = 0;
  return clipped(model, series.values[channel], channel).map((value) => {
    if (!Number.isNaN(value)) last = (value - model.mean[channel]) / model.scale[channel];
    return last;
  });
}

function clipped(model: Model, values: Float64Array, channel: number): Float64Array {
  const [low, high] = [model.clipLow[channel], model.clipHigh[channel]];
  return values.map((value) => Math.min(high, Math.max(low, value)));
}
