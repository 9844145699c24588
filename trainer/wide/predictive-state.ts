/**
 * From the joint factors of [past features | next past features | future observations] to a predictive state: the low-rank
 * part of the past that forecasts the future, its recursion and its forecasts, by plain algebra in the space of the factors.
 * Regression of the future on the past, the energy let go as its ridge; the leading directions of what that forecasts are
 * the state, of unit variance; the recursion is regressed on the next window's state. No matrix of (features × features).
 * Not for rows whose columns have a mean: the caller takes it away.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen, symmetrised } from '../linalg/eigen.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import { ridgeOf, type SvdFactors } from './incremental-svd.ts';
import { clipRadius } from './spectral-clip.ts';

/** Columns from one up to, not with, another. */
export interface ColumnSpan {
  readonly from: number;
  readonly to: number;
}

/** What the columns of the joint rows are. Spans may overlap: a window's next is itself, one observation on. */
export interface JointLayout {
  /** Features of the past at the origin t. */
  readonly past: ColumnSpan;
  /** The same features at t + 1. */
  readonly next: ColumnSpan;
  /** Observations at t + 1 … t + horizon, one after another, each of `outputs`. */
  readonly future: ColumnSpan;
  readonly outputs: number;
}

/** State x = W φ; x⁺ = A x + K y⁺ on the next observation, A₀ x without; y(t+h) = Fₕ x. */
export interface PredictiveState {
  readonly order: number;
  readonly outputs: number;
  readonly horizon: number;
  /** W (order × past features). */
  readonly stateMap: Float64Array;
  /** F (horizon · outputs × order). */
  readonly forecastMap: Float64Array;
  /** A (order × order) and K (order × outputs), with an observation. */
  readonly filterTransition: Float64Array;
  readonly gain: Float64Array;
  /** A₀ (order × order), without one. */
  readonly transition: Float64Array;
  /** Spectral radius of A₀ and of A as regressed, before the clip. */
  readonly radius: number;
  readonly filterRadius: number;
  /** (order) energy of the future that each state forecasts, as a share of all of it; falling. */
  readonly explained: Float64Array;
  /** Added to each column's energy. */
  readonly ridge: number;
}

/** A state that forecasts less than this share of the first one's is rounding. */
const LEAST_EXPLAINED = 1e-12;
/** Part of the mean column's energy that is always added, so that what is not excited stays finite. */
const LEAST_RIDGE = 1e-10;

/**
 * The parameters.
 *
 * shapes  factors of joint rows; result as described there; the order may come out lower than asked where the past
 *         forecasts less
 * units   state of unit variance; observations as in the rows
 * throws  RangeError for spans that do not fit the rows
 * source  Boots, Siddiqi & Gordon, International Journal of Robotics Research 30 (2011), section 3, for states as a low-rank
 *         map of past features and parameters by regression; Boots & Gordon, AAAI (2011), for the same from a running
 *         decomposition; Izenman, Journal of Multivariate Analysis 5 (1975), for the low-rank regression; Van Overschee &
 *         De Moor, Subspace Identification for Linear Systems (1996), chapter 3, for the recursion by regression of shifted
 *         states. Ours: weights are the observations' own, not those of canonical correlations (Hotelling, Biometrika 28,
 *         1936), which spend states on near, quiet directions
 * cost    O(rank² columns + (order + outputs)³)
 */
export function predictiveState(factors: SvdFactors, layout: JointLayout, order: number): PredictiveState {
  checkLayout(factors, layout, order);
  const ridge = ridgeOf(factors) + (LEAST_RIDGE * factors.energy) / factors.columns;
  const { map, explained } = states(factors, layout, order, ridge);
  const d = explained.length;
  const { past, next, future, outputs } = layout;
  const first = { from: future.from, to: future.from + outputs };
  const maps = { past: { span: past, map }, next: { span: next, map } };
  const stateEnergy = mapped(factors, maps.past, maps.past, d, ridge);
  const shifted = mapped(factors, maps.next, maps.past, d, ridge);
  const forecastMap = solveRight(stateWith(factors, maps.past, future, d, ridge), stateEnergy, d);
  const open = clipRadius(solveRight(shifted, stateEnergy, d), d);
  const filter = regressFilter(factors, maps, first, shifted, stateEnergy, d, ridge);
  return Object.freeze({
    order: d,
    outputs,
    horizon: (future.to - future.from) / outputs,
    stateMap: map,
    forecastMap,
    filterTransition: filter.transition,
    gain: filter.gain,
    transition: open.matrix,
    radius: open.radius,
    filterRadius: filter.radius,
    explained,
    ridge,
  });
}

/**
 * W, and the share of the future's energy by state. With A = S Vp, A A' = U diag(θ) U' and the past's own coordinates
 * y = θ^-½ U' A φ, of energy θ + λ, the ridge regression is Vf' S U diag(θ^½ / (θ + λ)) y.
 */
function states(
  factors: SvdFactors,
  { past, future }: JointLayout,
  order: number,
  ridge: number,
): { map: Float64Array; explained: Float64Array } {
  const { rank: r, singularValues: s } = factors;
  const scaled = (at: number): number => s[Math.floor(at / r)] * s[at % r];
  const inner = spanProducts(factors, past).map((value, at) => value * scaled(at));
  const { values: theta, vectors } = symmetricEigen(symmetrised(inner, r), r);
  const gf = spanProducts(factors, future);
  // In root' root = Vf Vf' the future's length is the plain one.
  const root = symmetricRoot(gf, r);
  const spread = multiply(
    root,
    Float64Array.from(vectors, (value, at) => value * s[Math.floor(at / r)]),
    r,
    r,
    r,
  );
  const told = new Float64Array(r * r);
  const toward = new Float64Array(r * r);
  for (let k = 0; k < r; k++) {
    if (!(theta[k] > LEAST_EXPLAINED * theta[0])) break;
    for (let i = 0; i < r; i++) {
      told[i * r + k] = spread[i * r + k] * Math.sqrt(theta[k] / (theta[k] + ridge));
      toward[i * r + k] = spread[i * r + k] / (theta[k] + ridge);
    }
  }
  const found = symmetricEigen(symmetrised(multiply(told, transpose(told, r, r), r, r, r), r), r);
  const total = gf.reduce((sum, value, at) => (Math.floor(at / r) === at % r ? sum + value * scaled(at) : sum), 0);
  let d = 0;
  while (d < Math.min(order, r) && found.values[d] > LEAST_EXPLAINED * found.values[0]) d++;
  const rows = leadingRows(found.vectors, r, d, (k) => 1 / Math.sqrt(found.values[k] / factors.weight));
  const inFactors = multiply(multiply(rows, toward, d, r, r), transpose(vectors, r, r), d, r, r);
  for (let at = 0; at < d * r; at++) inFactors[at] *= s[at % r];
  return {
    map: multiply(inFactors, spanRows(factors, past), d, r, past.to - past.from),
    explained: found.values.slice(0, d).map((value) => value / (total + ridge * (future.to - future.from))),
  };
}

/** The first d columns as rows, each times a factor. */
function leadingRows(vectors: Float64Array, r: number, d: number, factor: (k: number) => number): Float64Array {
  const rows = new Float64Array(d * r);
  for (let k = 0; k < d; k++) for (let i = 0; i < r; i++) rows[k * r + i] = vectors[i * r + k] * factor(k);
  return rows;
}

interface MappedSpan {
  readonly span: ColumnSpan;
  readonly map: Float64Array;
}

/** x⁺ on [x; y⁺]. */
function regressFilter(
  factors: SvdFactors,
  { past, next }: { past: MappedSpan; next: MappedSpan },
  first: ColumnSpan,
  shifted: Float64Array,
  stateEnergy: Float64Array,
  d: number,
  ridge: number,
): { transition: Float64Array; gain: Float64Array; radius: number } {
  const outputs = first.to - first.from;
  const size = d + outputs;
  const known = new Float64Array(size * size);
  const wanted = new Float64Array(d * size);
  const pastFirst = stateWith(factors, past, first, d, ridge);
  const nextFirst = stateWith(factors, next, first, d, ridge);
  const own = spanRows(factors, first);
  const r = factors.rank;
  const ownEnergy = multiplyTransposed(
    own,
    multiply(diagonal(factors.singularValues, r), own, r, r, outputs),
    outputs,
    r,
    outputs,
  );
  for (let i = 0; i < d; i++) {
    known.set(stateEnergy.subarray(i * d, i * d + d), i * size);
    wanted.set(shifted.subarray(i * d, i * d + d), i * size);
    for (let j = 0; j < outputs; j++) {
      known[(d + j) * size + i] = pastFirst[j * d + i];
      known[i * size + d + j] = pastFirst[j * d + i];
      wanted[i * size + d + j] = nextFirst[j * d + i];
    }
  }
  for (let i = 0; i < outputs; i++) {
    known.set(ownEnergy.subarray(i * outputs, i * outputs + outputs), (d + i) * size + d);
    known[(d + i) * size + d + i] += ridge;
  }
  const solved = solveRight(wanted, known, size);
  const transition = new Float64Array(d * d);
  const gain = new Float64Array(d * outputs);
  for (let i = 0; i < d; i++) {
    transition.set(solved.subarray(i * size, i * size + d), i * d);
    gain.set(solved.subarray(i * size + d, i * size + size), i * outputs);
  }
  const clipped = clipRadius(transition, d);
  return { transition: clipped.matrix, gain, radius: clipped.radius };
}

/** Energy of two states with each other, W C W', ridge where they share columns. (d × d) */
function mapped(factors: SvdFactors, a: MappedSpan, b: MappedSpan, d: number, ridge: number): Float64Array {
  const left = weighted(factors, a, d);
  const right = weighted(factors, b, d);
  const out = multiply(left, transpose(right, d, factors.rank), d, factors.rank, d);
  const shift = a.span.from - b.span.from;
  const width = a.span.to - a.span.from;
  for (let i = 0; i < d; i++) {
    for (let j = 0; j < d; j++) {
      let sum = 0;
      for (let c = Math.max(0, -shift); c < width && c + shift < width; c++)
        sum += a.map[i * width + c] * b.map[j * width + c + shift];
      out[i * d + j] += ridge * sum;
    }
  }
  return out;
}

/** W V' S (d × rank). */
function weighted(factors: SvdFactors, { span, map }: MappedSpan, d: number): Float64Array {
  const r = factors.rank;
  const width = span.to - span.from;
  const out = multiply(map, transpose(spanRows(factors, span), r, width), d, width, r);
  for (let i = 0; i < d; i++) for (let k = 0; k < r; k++) out[i * r + k] *= factors.singularValues[k];
  return out;
}

/** Energy of columns with a state, (span × d); ridge where they share columns. */
function stateWith(factors: SvdFactors, state: MappedSpan, span: ColumnSpan, d: number, ridge: number): Float64Array {
  const r = factors.rank;
  const width = span.to - span.from;
  const half = weighted(factors, state, d);
  for (let i = 0; i < d; i++) for (let k = 0; k < r; k++) half[i * r + k] *= factors.singularValues[k];
  const out = multiplyTransposed(spanRows(factors, span), transpose(half, d, r), width, r, d);
  const past = state.span.to - state.span.from;
  for (let c = 0; c < width; c++) {
    const at = span.from + c - state.span.from;
    if (at < 0 || at >= past) continue;
    for (let i = 0; i < d; i++) out[c * d + i] += ridge * state.map[i * past + at];
  }
  return out;
}

/** B A⁻¹ for a symmetric positive A (n × n), B (any × n). */
function solveRight(b: Float64Array, a: Float64Array, n: number): Float64Array {
  const rows = b.length / n;
  const x = transpose(b, rows, n);
  solveCholesky(cholesky(a, n), n, x, rows);
  return transpose(x, n, rows);
}

/** The span's columns of the basis, (rank × width). */
function spanRows({ basis, rank, columns }: SvdFactors, { from, to }: ColumnSpan): Float64Array {
  const out = new Float64Array(rank * (to - from));
  for (let k = 0; k < rank; k++) out.set(basis.subarray(k * columns + from, k * columns + to), k * (to - from));
  return out;
}

function spanProducts(factors: SvdFactors, span: ColumnSpan): Float64Array {
  const rows = spanRows(factors, span);
  const width = span.to - span.from;
  return multiply(rows, transpose(rows, factors.rank, width), factors.rank, width, factors.rank);
}

/** diag(s²). */
function diagonal(s: Float64Array, r: number): Float64Array {
  const out = new Float64Array(r * r);
  for (let k = 0; k < r; k++) out[k * r + k] = s[k] * s[k];
  return out;
}

/** R with R'R = A, for A positive but for rounding. */
function symmetricRoot(a: Float64Array, n: number): Float64Array {
  const { values, vectors } = symmetricEigen(symmetrised(a, n), n);
  const out = transpose(vectors, n, n);
  for (let k = 0; k < n; k++) {
    const root = Math.sqrt(Math.max(0, values[k]));
    for (let j = 0; j < n; j++) out[k * n + j] *= root;
  }
  return out;
}

function checkLayout({ columns }: SvdFactors, layout: JointLayout, order: number): void {
  const { past, next, future, outputs } = layout;
  for (const [name, { from, to }] of Object.entries({ past, next, future })) {
    if (!(from >= 0 && from < to && to <= columns))
      throw new RangeError(`${name}: expected columns within 0 to ${columns}, got ${from} to ${to}`);
  }
  if (next.to - next.from !== past.to - past.from)
    throw new RangeError('next: expected as many columns as past, got another number');
  if (!(outputs >= 1) || (future.to - future.from) % outputs !== 0)
    throw new RangeError(`future: expected a multiple of ${outputs} columns, got ${future.to - future.from}`);
  if (!(Number.isInteger(order) && order >= 1)) throw new RangeError(`order: expected 1 or more, got ${order}`);
}
