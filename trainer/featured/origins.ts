/**
 * What the features are learned from: at origins spread over a record, the summary the gateway will see, and what the linear
 * map leaves over of the path ahead. The gateway's own filter runs over the record, gaps and all; the path's remainder is
 * expressed on the model's horizon curves, so that there are a few numbers instead of a path.
 */
import { createState, forecastPath, type LinearModel, settlingTicksOf } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { Filled } from '../identify/fill.ts';
import { Follower } from '../judge/follow.ts';
import { cholesky, solveCholesky, solveLower } from '../linalg/cholesky.ts';
import { multiplyTransposed, transpose } from '../linalg/products.ts';
import type { TickSpan } from '../span.ts';

/** Origins of a record. */
export interface Origins {
  /** Rising indices into the series. */
  readonly at: Int32Array;
  /** (n × d) predictive states */
  readonly states: Float64Array;
  /** Values folded in, (nc) of (ticks from `from`), an index into the series. */
  readonly folded: { readonly from: number; readonly values: readonly Float64Array[] };
  /** (n × ny·r) remainders on orthonormal curves: squares add up to the weighted squared error that curves can reach */
  readonly targets: Float64Array;
  /** (ny) of (r × r) lower L with B'WB = L L': a signal's coefficients c have the orthonormal ones L'c. */
  readonly curves: readonly Float64Array[];
}

/** More than this do not sharpen a few hundred weights, and cost time … */
export const MOST_ORIGINS = 8000;
/** … nor may all their paths take more numbers than this. */
const MOST_NUMBERS = 8_000_000;
/** Of the mean squared remainder: steps that the linear map all but knows do not outweigh the others. */
const LEAST_SQUARE = 0.1;

/**
 * Gathers origins.
 *
 * shapes  span of indices; the last origin has the whole horizon inside it
 * units   standardised
 * throws  TrainError 'fit' if the curves are linearly dependent
 * source  weighted least squares over the horizon
 * cost    one replay, a path an origin
 */
export function gatherOrigins(
  model: LinearModel,
  series: Series,
  filled: Filled,
  span: TickSpan,
  mostOrigins: number,
): Origins {
  const { signalCount: ny, horizon: H, order: d } = model;
  const most = Math.min(mostOrigins, MOST_NUMBERS / (ny * H));
  const every = Math.max(1, Math.ceil((span.toTick - span.fromTick) / most));
  const at = usableOrigins(filled, span, H, every);
  const states = new Float64Array(at.length * d);
  const rest = new Float64Array(at.length * ny * H);
  let n = 0;
  const folded = runFilter(model, series, at, (t, state, path) => {
    states.set(state.x, n * d);
    for (let i = 0; i < ny; i++) {
      for (let h = 1; h <= H; h++) {
        const forecast = (path[i * H + h - 1] - model.mean[i]) / model.scale[i];
        rest[(n * ny + i) * H + h - 1] = filled.values[i][t + h] - forecast;
      }
    }
    n++;
  });
  return { at, states, folded, ...onCurves(model, rest, at.length) };
}

/**
 * Remainders on orthonormal curves of each signal, steps weighted by one over the squared remainder itself, so that a gain
 * counts alike near and far, and alike in every signal.
 */
function onCurves(model: LinearModel, rest: Float64Array, n: number): Pick<Origins, 'targets' | 'curves'> {
  const { signalCount: ny, horizon: H, basisCount: r, horizonBasis } = model;
  const targets = new Float64Array(n * ny * r);
  const curves = Array.from({ length: ny }, (_, i) => {
    const weight = stepWeights(rest, i, ny, H, n);
    const weighted = horizonBasis.map((value, k) => value * Math.sqrt(weight[Math.floor(k / r)]));
    const lower = cholesky(steadied(multiplyTransposed(weighted, weighted, r, H, r), r), r);
    // Row k of L⁻¹ B'W^½: orthonormal coefficients of a weighted path.
    const projector = transpose(weighted, H, r);
    solveLower(lower, r, projector, H);
    for (let k = 0; k < projector.length; k++) projector[k] *= Math.sqrt(weight[k % H]);
    for (let o = 0; o < n; o++) {
      const from = (o * ny + i) * H;
      for (let k = 0; k < r; k++) {
        let sum = 0;
        for (let h = 0; h < H; h++) sum += projector[k * H + h] * rest[from + h];
        targets[(o * ny + i) * r + k] = sum;
      }
    }
    return lower;
  });
  return { targets, curves };
}

/** (H) */
function stepWeights(rest: Float64Array, signal: number, ny: number, H: number, n: number): Float64Array {
  const square = new Float64Array(H);
  for (let o = 0; o < n; o++) {
    for (let h = 0; h < H; h++) square[h] += rest[(o * ny + signal) * H + h] ** 2 / n;
  }
  const mean = square.reduce((sum, value) => sum + value, 0) / H;
  return square.map((value) => (mean > 0 ? 1 / (H * (value + LEAST_SQUARE * mean)) : 0));
}

/** Runs the filter over the record and stops at each origin; gives the values folded in. */
function runFilter(
  model: LinearModel,
  series: Series,
  at: Int32Array,
  visit: (t: number, state: ReturnType<typeof createState>, path: Float64Array) => void,
): Origins['folded'] {
  if (at.length === 0) return { from: 0, values: [] };
  const follower = new Follower(model, series, createState(model));
  const { state } = follower;
  const path = new Float64Array(model.signalCount * model.horizon);
  const warm = Math.max(model.warmupTicks, settlingTicksOf(model));
  let next = 0;
  const from = Math.max(0, at[0] - warm);
  const values = series.values.map(() => new Float64Array(at[at.length - 1] + 1 - from));
  for (let t = from; next < at.length; t++) {
    follower.take(t, t === at[next]);
    for (let c = 0; c < values.length; c++) values[c][t - from] = state.value[c];
    if (t !== at[next]) continue;
    forecastPath(model, state, path);
    visit(t, state, path);
    next++;
  }
  return { from, values };
}

/** Every so many ticks, outside long gaps from the origin to the horizon. */
function usableOrigins({ inLongGap }: Filled, span: TickSpan, horizon: number, every: number): Int32Array {
  const out: number[] = [];
  let nextGap = Number.POSITIVE_INFINITY;
  for (let t = span.toTick - 1; t >= span.fromTick; t--) {
    if (inLongGap[t] !== 0) nextGap = t;
    if (t + horizon < span.toTick && nextGap > t + horizon && (t - span.fromTick) % every === 0) out.push(t);
  }
  return Int32Array.from(out.reverse());
}

/** A hair on the diagonal, so that curves which are nearly one stay apart. */
function steadied(gram: Float64Array, n: number): Float64Array {
  let trace = 0;
  for (let k = 0; k < n; k++) trace += gram[k * n + k];
  for (let k = 0; k < n; k++) gram[k * n + k] += (1e-9 * trace) / n || 1;
  return gram;
}

/**
 * A signal's coefficients on the model's own curves, from the orthonormal ones: solves L'c = o for each column.
 *
 * shapes  orthonormal (r × m), curves (r × r); result (r × m)
 * units   standardised
 * throws  nothing
 * source  L L' c = L o
 * cost    O(r² m)
 */
export function onModelCurves(orthonormal: Float64Array, curves: Float64Array, r: number, m: number): Float64Array {
  const out = new Float64Array(r * m);
  for (let i = 0; i < r; i++) {
    for (let k = 0; k <= i; k++) {
      for (let j = 0; j < m; j++) out[i * m + j] += curves[i * r + k] * orthonormal[k * m + j];
    }
  }
  solveCholesky(curves, r, out, m);
  return out;
}
