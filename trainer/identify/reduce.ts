/**
 * A recursion of few numbers in the place of the bank and its bottleneck: the bank with the learned map is a linear system
 * φ⁺ = A φ + B Δ with the forecast as its output, and what it remembers is cut down to the combinations that the readings
 * excite and that later forecasts show. Excited: the features' own covariance, taken from the readings, so their colour
 * counts. Shown: the observability Gramian, which counts a combination's weight in all later forecasts, not in the
 * present one alone; a recursion regressed on the present state lost where both were measured. The cut is then improved
 * by projecting with what the reduced recursion shares with the bank, which lowers the error of the forecast itself.
 */
import { cholesky, solveLowerTransposed } from '../linalg/cholesky.ts';
import { symmetricEigen, symmetrised } from '../linalg/eigen.ts';
import { solveStein } from '../linalg/lyapunov.ts';
import { type ModalRecursion, modalForm } from '../linalg/modal.ts';
import { applyModes, type Modes, spectralRadius, transposeModes } from '../linalg/modes.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import { solveGeneral } from '../linalg/solve.ts';
import { stepWeight } from './bottleneck.ts';
import { type RecursionInput, type RecursionMoments, recursionMoments } from './recursion-moments.ts';
import type { Layout } from './ridge.ts';

/** The bank's system, balanced: directions in falling order of what cutting them costs. */
export interface Balanced {
  readonly input: RecursionInput;
  readonly layout: Layout;
  /** (p × ny·steps) the learned map, steps weighted. */
  readonly map: Float64Array;
  /** Mean square of the map's weighted forecast, summed over signals and steps. */
  readonly energy: number;
  /** (p) Hankel singular values, falling. */
  readonly values: Float64Array;
  /** Directions above the noise of the arithmetic; the largest order that means anything. */
  readonly rank: number;
  /** (p × p) lower factor of the features' covariance. */
  readonly factor: Float64Array;
  /** (p × p) column k the k-th direction. */
  readonly directions: Float64Array;
}

/**
 * A reduced recursion with its moments, and the mean squared error of its weighted forecast against the full map's, with
 * what rounding the read-out to int8 would add: modes that cancel each other need large weights, and those round coarsely.
 */
export interface Reduced {
  /** Each mode's numbers of unit variance. */
  readonly recursion: ModalRecursion;
  readonly moments: RecursionMoments;
  readonly error: number;
}

/** Share by which each variance is raised, and the least share of the largest variance that counts as one. */
const RAISED = 1e-9;
const SILENT = 1e-6;
/** A pole may forget this many times more slowly than the bank's slowest; beyond, it is drawn in. */
const SLOWER = 4;
/** Directions below this share of the first are noise of the arithmetic. */
const LEAST_SHARE = 1e-6;
/** An improvement below this share of the error ends the improving. */
const LEAST_GAIN = 0.01;

/**
 * Balances the bank's system.
 *
 * shapes  map (p × ny·steps) of the bank's features, no lags among them
 * units   standardised
 * throws  TrainError 'fit' if the features' covariance is not positive definite
 * source  Moore, IEEE Trans. Automatic Control 26 (1981); with an input-weighted Gramian: Enns, 23rd Conf. Decision and
 *         Control (1984); square-root form: Laub, Heath, Paige & Ward, IEEE Trans. Automatic Control 32 (1987)
 * cost    O(p² ny steps + p³), with one symmetric eigendecomposition
 */
export function balance(input: RecursionInput, map: Float64Array, layout: Layout): Balanced {
  const { modes } = input.bank.recursion;
  const p = modes.size;
  const width = layout.signalCount * layout.steps;
  const weighted = map.map((value, at) => value * stepWeight((at % layout.steps) + 1));
  const backwards = transposeModes(modes);
  const observed = solveStein(backwards, backwards, multiply(weighted, transpose(weighted, p, width), p, width, p));
  const factor = cholesky(raised(input.covariance, p), p);
  const both = multiplyTransposed(factor, multiply(observed, factor, p, p, p), p, p, p);
  const { values, vectors } = symmetricEigen(symmetrised(both, p), p);
  const hankel = values.map((value) => Math.sqrt(Math.max(0, value)));
  const excited = multiplyTransposed(factor, weighted, p, p, width);
  return {
    input,
    layout,
    map: weighted,
    energy: excited.reduce((sum, value) => sum + value * value, 0),
    values: hankel,
    rank: Math.max(1, hankel.filter((value) => value > LEAST_SHARE * hankel[0]).length),
    factor,
    directions: vectors,
  };
}

/**
 * The recursion of an order: balanced truncation, and up to `rounds` improvements of it, each kept only if the error
 * falls. Null where the cut has no modal form.
 *
 * shapes  order at most p
 * units   standardised
 * throws  nothing
 * source  truncation as `balance`; the improvement is the two-sided iteration for the first-order conditions of Wilson,
 *         Proc. IEE 117 (1970), as in Xu & Zeng, Mathematics in Computer Science 5 (2011), with the readings' own moments
 *         in the place of white noise's
 * cost    a round: one pass over the readings, O(p² d + p d ny steps) and one eigendecomposition of order d
 */
export function reduce(balanced: Balanced, order: number, rounds: number): Reduced | null {
  let best = truncate(balanced, order);
  for (let round = 0; round < rounds && best !== null; round++) {
    const next = improve(balanced, best);
    if (next === null || !(next.error < best.error)) break;
    const gain = 1 - next.error / best.error;
    best = next;
    if (gain < LEAST_GAIN) break;
  }
  return best;
}

/**
 * As `reduce`, at the largest order up to the one asked for that has a modal form; null where none has.
 *
 * shapes  order at most p
 * units   standardised
 * throws  nothing
 * source  as `reduce`
 * cost    as `reduce`, once more for each order without one
 */
export function reduceUpTo(balanced: Balanced, order: number, rounds: number): Reduced | null {
  for (let d = Math.min(order, balanced.rank); d > 0; d--) {
    const reduced = reduce(balanced, d, rounds);
    if (reduced !== null) return reduced;
  }
  return null;
}

/** The first directions: T⁻ A T, T⁻ B with T = L V and T⁻ = V' L⁻¹, so that the state has unit covariance. */
function truncate(balanced: Balanced, order: number): Reduced | null {
  const { factor, directions, input } = balanced;
  const { modes, drive } = input.bank.recursion;
  const p = modes.size;
  const nc = drive.length / p;
  const columns = new Float64Array(p * order);
  for (let i = 0; i < p; i++) for (let k = 0; k < order; k++) columns[i * order + k] = directions[i * p + k];
  const out = multiply(factor, columns, p, p, order);
  solveLowerTransposed(factor, p, columns, order);
  const a = multiplyTransposed(columns, applyModes(modes, out, order), order, p, order);
  return measure(balanced, a, multiplyTransposed(columns, drive, order, p, nc), order);
}

/** One projection, by what the recursion shares with the bank (X) and by what their forecasts show of each other (Y). */
function improve(balanced: Balanced, from: Reduced): Reduced | null {
  const { map, layout, input } = balanced;
  const { modes, drive } = input.bank.recursion;
  const p = modes.size;
  const nc = drive.length / p;
  const d = from.recursion.modes.size;
  const width = layout.signalCount * layout.steps;
  const readout = regress(from.moments, forecasts(balanced, from.moments), d, width);
  if (readout === null) return null;
  const shared = transpose(from.moments.withBank, d, p);
  const shown = multiply(map, transpose(readout, d, width), p, width, d);
  const both = solveStein(transposeModes(modes), transposeModes(from.recursion.modes), shown);
  const left = multiplyTransposed(both, shared, d, p, d);
  const a = solveGeneral(left, multiplyTransposed(both, applyModes(modes, shared, d), d, p, d), d, d);
  const b = solveGeneral(left, multiplyTransposed(both, drive, d, p, nc), d, nc);
  return a === null || b === null ? null : measure(balanced, a, b, d);
}

/** Takes a recursion apart, draws in what would not forget, scales its numbers to unit variance and finds its error. */
function measure(balanced: Balanced, a: Float64Array, b: Float64Array, d: number): Reduced | null {
  const { input, layout } = balanced;
  const nc = b.length / d;
  const found = modalForm(a, b, d, nc);
  if (found === null) return null;
  const slowest = 1 - (1 - spectralRadius(input.bank.recursion.modes)) / SLOWER;
  const modes = drawnIn(found.modes, slowest);
  const { recursion, moments } = scaled(
    { modes, drive: found.drive },
    recursionMoments(input, { modes, drive: found.drive }),
  );
  const width = layout.signalCount * layout.steps;
  const shared = forecasts(balanced, moments);
  const readout = regress(moments, shared, d, width);
  if (readout === null) return null;
  const explained = readout.reduce((sum, value, at) => sum + value * shared[at], 0);
  const error = Math.max(0, balanced.energy - explained) + roundingNoise(readout, d, width);
  return Number.isFinite(explained) ? { recursion, moments, error } : null;
}

/** (d × ny·steps) mean products of the state with the map's weighted forecast. */
function forecasts({ map, layout }: Balanced, { withBank }: RecursionMoments): Float64Array {
  const width = layout.signalCount * layout.steps;
  const p = map.length / width;
  return multiply(withBank, map, withBank.length / p, p, width);
}

/** (d × width) regression of forecasts on the state; null where its covariance cannot be solved with. */
function regress(
  { covariance }: RecursionMoments,
  shared: Float64Array,
  d: number,
  width: number,
): Float64Array | null {
  return solveGeneral(raised(covariance, d), shared, d, width);
}

/** Σ over the forecasts of d δ²/12, with δ a 127th of the largest weight: states of unit variance, each rounded by itself. */
function roundingNoise(readout: Float64Array, d: number, width: number): number {
  let sum = 0;
  for (let j = 0; j < width; j++) {
    let largest = 0;
    for (let k = 0; k < d; k++) largest = Math.max(largest, Math.abs(readout[k * width + j]));
    sum += largest * largest;
  }
  return (d * sum) / (12 * 127 * 127);
}

/** Poles of a modulus above `slowest` drawn in to it. */
function drawnIn(modes: Modes, slowest: number): Modes {
  const re = modes.re.slice();
  const im = modes.im.slice();
  for (let k = 0; k < re.length; k++) {
    const modulus = Math.hypot(re[k], im[k]);
    if (modulus <= slowest) continue;
    re[k] *= slowest / modulus;
    im[k] *= slowest / modulus;
  }
  return { ...modes, re, im };
}

/** With every mode's numbers of unit variance; the two of a pair share their scale. */
function scaled({ modes, drive }: ModalRecursion, moments: RecursionMoments): Pick<Reduced, 'recursion' | 'moments'> {
  const d = modes.size;
  const units = new Float64Array(d).fill(1);
  modes.first.forEach((at, k) => {
    const count = modes.isComplex[k] === 1 ? 2 : 1;
    let square = 0;
    for (let j = at; j < at + count; j++) square += moments.covariance[j * d + j];
    if (square > 0) units.fill(Math.sqrt(count / square), at, at + count);
  });
  const byRow = (values: Float64Array): Float64Array => {
    const cols = values.length / d;
    return values.map((value, at) => value * units[Math.floor(at / cols)]);
  };
  return {
    recursion: { modes, drive: byRow(drive) },
    moments: {
      covariance: byRow(moments.covariance).map((value, at) => value * units[at % d]),
      withBank: byRow(moments.withBank),
      withLevels: byRow(moments.withLevels),
    },
  };
}

/** With each variance raised by a hair, so that copies of a signal and silent features leave it positive definite. */
function raised(covariance: Float64Array, n: number): Float64Array {
  const out = symmetrised(covariance, n);
  let largest = 0;
  for (let k = 0; k < n; k++) largest = Math.max(largest, out[k * n + k]);
  for (let k = 0; k < n; k++) {
    out[k * n + k] += RAISED * (largest > 0 ? Math.max(out[k * n + k], SILENT * largest) : 1);
  }
  return out;
}
