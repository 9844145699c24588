/**
 * What the mean paths miss, learned: ridge of the roll-outs' error on rectified random features of the section's state. It
 * makes up for what the section leaves out (storms that go on growing, levels at which a pump behaves otherwise) and is
 * kept for a signal only where it lessens the error on a later stretch.
 */
import {
  createCorrection,
  type SwitchedCorrection,
  type SwitchedSection,
  summaryLength,
  writeCorrectionFeatures,
} from '@stillwell/runtime/filter';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen } from '../linalg/eigen.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import type { SwitchedInput } from './learn.ts';
import { replaySection } from './replay-section.ts';

/** Features, curves, origins at most. */
const COUNT = 96;
const CURVES = 8;
const MOST_ORIGINS = 10_000;
/** Penalties, as shares of the mean second moment of a feature. */
const PENALTIES = [0.001, 0.01, 0.1, 1];
const LATER_SHARE = 0.25;
/** A correction reaches at most this many standard deviations of the error. */
const LIMIT_SD = 3;

/** No correction. */
export const NO_CORRECTION: SwitchedCorrection = {
  count: 0,
  readout: new Float64Array(0),
  basis: new Float64Array(0),
  limit: new Float64Array(0),
};

/**
 * Learns the correction of a section's forecast signals; `NO_CORRECTION` with limits of zero where it does not pay.
 *
 * shapes  as SwitchedCorrection
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  random features: Rahimi & Recht, NIPS 2007, with rectified ones as in extreme learning machines; ridge
 * cost    up to MOST_ORIGINS roll-outs, and O(origins · D²)
 */
export function fitCorrection(
  section: SwitchedSection,
  input: SwitchedInput,
  clips: { readonly low: Float64Array; readonly high: Float64Array },
): SwitchedCorrection {
  const { horizon, learnTicks } = input;
  const q = section.forecast.length;
  const none = { ...NO_CORRECTION, limit: new Float64Array(q) };
  const gathered = gather(section, input, clips);
  const later = Math.floor((1 - LATER_SHARE) * gathered.origins);
  if (later < 4 * COUNT || gathered.origins - later < COUNT || learnTicks < 10 * horizon) return none;
  const { width, columns } = gathered;
  const early = momentsOf(gathered, 0, later);
  const { penalty, pays } = choose(gathered, early, later, q, horizon);
  if (!pays.includes(true)) return none;
  const map = solve(momentsOf(gathered, 0, gathered.origins), penalty, width, columns);
  const limit = limitsOf(gathered, q, horizon).map((value, k) => (pays[k] ? value : 0));
  return { count: COUNT, ...shrink(map, gathered, q, horizon), limit };
}

interface Gathered {
  /** (origins × width) and (origins × q·H). */
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly origins: number;
  readonly width: number;
  readonly columns: number;
}

function gather(
  section: SwitchedSection,
  input: SwitchedInput,
  clips: { readonly low: Float64Array; readonly high: Float64Array },
): Gathered {
  const { horizon, learnTicks, values, isRead } = input;
  const buffers = createCorrection(section, COUNT, horizon);
  const width = COUNT + 1 + summaryLength(section);
  const rows = rowsOf(section);
  const columns = rows.length * horizon;
  const from = Math.min(2 * horizon, learnTicks);
  const stride = Math.max(1, Math.ceil((learnTicks - horizon - from) / MOST_ORIGINS));
  const most = Math.max(0, Math.ceil((learnTicks - horizon - from) / stride));
  const x = new Float64Array(most * width);
  const y = new Float64Array(most * columns);
  let origins = 0;
  replaySection(section, input, clips, { from, to: learnTicks - horizon, stride }, ({ at, core, value, sums }) => {
    writeCorrectionFeatures(section, core, buffers, value);
    x.set(buffers.features, origins * width);
    rows.forEach(({ channel, row }, k) => {
      for (let h = 1; h <= horizon; h++) {
        const isKnown = isRead[channel][at + h] === 1;
        const error = values[channel][at + h] - sums[row * horizon + h - 1];
        y[origins * columns + k * horizon + h - 1] = isKnown ? error : 0;
      }
    });
    origins++;
  });
  return { x, y, origins, width, columns };
}

/** Channel of each forecast signal, and its row among the mean paths. */
function rowsOf({ forecast, driven, discrete }: SwitchedSection): { channel: number; row: number }[] {
  return Array.from(forecast, (channel) => {
    const at = driven.indexOf(channel);
    return { channel, row: at >= 0 ? at : driven.length + discrete.indexOf(channel) };
  });
}

interface Moments {
  readonly gram: Float64Array;
  readonly right: Float64Array;
}

function momentsOf({ x, y, width, columns }: Gathered, from: number, to: number): Moments {
  const rows = x.subarray(from * width, to * width);
  const right = y.subarray(from * columns, to * columns);
  return {
    gram: multiplyTransposed(rows, rows, width, to - from, width),
    right: multiplyTransposed(rows, right, width, to - from, columns),
  };
}

function solve({ gram, right }: Moments, penalty: number, width: number, columns: number): Float64Array {
  const own = gram.slice();
  let trace = 0;
  for (let f = 0; f < width; f++) trace += gram[f * (width + 1)];
  for (let f = 0; f < width; f++) own[f * (width + 1)] += (penalty * trace) / width + 1e-9;
  const map = right.slice();
  solveCholesky(cholesky(own, width), width, map, columns);
  return map;
}

/** The penalty with the least error on the later origins, and the signals for which that is less than without. */
function choose(
  gathered: Gathered,
  early: Moments,
  later: number,
  q: number,
  horizon: number,
): { penalty: number; pays: boolean[] } {
  const { x, y, origins, width, columns } = gathered;
  const limit = limitsOf(gathered, q, horizon);
  let penalty = PENALTIES[0];
  let least = Number.POSITIVE_INFINITY;
  let pays = new Array<boolean>(q).fill(false);
  for (const tried of PENALTIES) {
    const map = solve(early, tried, width, columns);
    const said = multiply(x.subarray(later * width), map, origins - later, width, columns);
    const before = new Float64Array(q);
    const after = new Float64Array(q);
    for (let at = 0; at < said.length; at++) {
      const k = Math.floor((at % columns) / horizon);
      const error = y[later * columns + at];
      const taken = Math.max(-limit[k], Math.min(limit[k], said[at]));
      before[k] += error * error;
      after[k] += (error - taken) * (error - taken);
    }
    const total = after.reduce((sum, value, k) => sum + (before[k] > 0 ? Math.min(1, value / before[k]) : 1), 0);
    if (total >= least) continue;
    least = total;
    penalty = tried;
    pays = Array.from(after, (value, k) => value < before[k]);
  }
  return { penalty, pays };
}

/** (q) */
function limitsOf({ y, columns, origins }: Gathered, q: number, horizon: number): Float64Array {
  const squares = new Float64Array(q);
  for (let at = 0; at < origins * columns; at++) squares[Math.floor((at % columns) / horizon)] += y[at] * y[at];
  return squares.map((sum) => LIMIT_SD * Math.sqrt(sum / Math.max(1, origins * horizon)));
}

/** Weight of a step, counted from 0: the curves are to keep the first steps as well as the last, whose errors are larger. */
function root(h: number): number {
  return Math.sqrt(h + 1);
}

/** A few curves over the horizon, shared by all signals. */
function shrink(
  map: Float64Array,
  gathered: Gathered,
  q: number,
  horizon: number,
): { readout: Float64Array; basis: Float64Array } {
  const { x, origins, width, columns } = gathered;
  const curves = Math.min(CURVES, horizon);
  const said = multiply(x, map, origins, width, columns);
  const gram = new Float64Array(horizon * horizon);
  for (let k = 0; k < q; k++) {
    const own = new Float64Array(origins * horizon);
    for (let row = 0; row < origins; row++) {
      own.set(said.subarray(row * columns + k * horizon, row * columns + (k + 1) * horizon), row * horizon);
    }
    const one = multiplyTransposed(own, own, horizon, origins, horizon);
    for (let at = 0; at < one.length; at++) gram[at] += one[at] / (root(Math.floor(at / horizon)) * root(at % horizon));
  }
  for (let g = 0; g < horizon; g++) for (let h = 0; h < g; h++) gram[h * horizon + g] = gram[g * horizon + h];
  const { vectors } = symmetricEigen(gram, horizon);
  const basis = new Float64Array(horizon * curves);
  const across = new Float64Array(horizon * curves);
  for (let h = 0; h < horizon; h++)
    for (let c = 0; c < curves; c++) {
      basis[h * curves + c] = vectors[h * horizon + c] * root(h);
      across[h * curves + c] = vectors[h * horizon + c] / root(h);
    }
  const byColumn = transpose(map, width, columns);
  const readout = new Float64Array(q * curves * width);
  for (let k = 0; k < q; k++) {
    const rows = byColumn.subarray(k * horizon * width, (k + 1) * horizon * width);
    readout.set(multiplyTransposed(across, rows, curves, horizon, width), k * curves * width);
  }
  return { readout, basis };
}
