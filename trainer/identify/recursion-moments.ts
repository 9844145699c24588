/**
 * Second moments of a recursion x(t) = A x(t−1) + B Δ(t) run over the readings, and what it shares with the bank's
 * features. One pass runs the recursion and holds it against the next changes; all else solves Stein equations, as for
 * the bank itself: Σ s s' = F (Σ s s' + E) F' + F N G' + G N' F' + G D G' with N = Σ s(t−1) Δ(t)', D = Σ Δ Δ' and E what
 * lies at the blocks' two ends. So a recursion is tried at the price of a pass over few numbers. To each product a share is
 * added of what it would be were every channel to move by itself (alone-moments.ts).
 */
import { solveStein } from '../linalg/lyapunov.ts';
import type { ModalRecursion } from '../linalg/modal.ts';
import { applyModes, type Modes, stepModes } from '../linalg/modes.ts';
import { multiply, transpose } from '../linalg/products.ts';
import { type AloneRun, addAlone, aheadAlone, laggedProducts } from './alone-moments.ts';
import type { Bank } from './bank.ts';
import { dotShifted } from './cross-steps.ts';
import type { Block } from './moments.ts';
import { flattenPoles } from './poles.ts';

/** One run of a recursion: sums over the origins of all blocks. */
interface Run extends AloneRun {
  /** (blocks) of (n): one tick before the block's first origin, and at its last. */
  readonly before: readonly Float64Array[];
  readonly after: readonly Float64Array[];
  /** (n × nc) Σ s(t−1) Δ(t)'. */
  readonly ahead: Float64Array;
}

/** What moves a recursion. */
interface Excitation {
  readonly changes: readonly Float64Array[];
  readonly blocks: readonly Block[];
  readonly origins: number;
  /** (nc × nc) Σ Δ(t) Δ(t)'. */
  readonly together: Float64Array;
  /** (nc) of (lags): Σ Δ_c(t) Δ_c(t + k). */
  readonly lagged: readonly Float64Array[];
  /** Share added of what channels moving each by itself would give. */
  readonly aloneShare: number;
}

/** What every recursion over the same readings is held against. */
export interface RecursionInput extends Excitation {
  /** The bank without level and lags. */
  readonly bank: Run;
  /** (p × p) mean products of the bank's features. */
  readonly covariance: Float64Array;
  /** The level of every channel, −z: numbers that forget nothing, from −z of the first reading on. */
  readonly levels: Run;
  /** (nc × nc) mean products of the levels. */
  readonly levelCovariance: Float64Array;
  /** (nc × p) mean products of levels and features. */
  readonly levelsWithBank: Float64Array;
}

/** Mean products. */
export interface RecursionMoments {
  /** (d × d) */
  readonly covariance: Float64Array;
  /** (d × p) with the bank's features. */
  readonly withBank: Float64Array;
  /** (d × nc) with the levels. */
  readonly withLevels: Float64Array;
}

/**
 * The bank of all channels as one recursion.
 *
 * shapes  modes of p = nc·F numbers, drive (p × nc); the bank's level and lags left out
 * units   standardised
 * throws  nothing
 * source  as `flattenPoles`
 * cost    trivial
 */
export function bankRecursion(bank: Bank, channels: number): ModalRecursion {
  const poles = flattenPoles({ ...bank, hasLevel: false });
  const perChannel = perChannelOf(bank);
  const count = channels * poles.count;
  const modes: Modes = {
    size: channels * perChannel,
    first: new Int32Array(count),
    isComplex: new Uint8Array(count),
    re: new Float64Array(count),
    im: new Float64Array(count),
  };
  const drive = new Float64Array(modes.size * channels);
  for (let c = 0; c < channels; c++) {
    for (let m = 0; m < poles.count; m++) {
      const k = c * poles.count + m;
      const f = c * perChannel + poles.feature[m];
      modes.first[k] = f;
      modes.isComplex[k] = poles.isComplex[m];
      modes.re[k] = poles.poleRe[m];
      modes.im[k] = poles.poleIm[m];
      drive[f * channels + c] = poles.driveRe[m];
      if (poles.isComplex[m] === 1) drive[(f + 1) * channels + c] = poles.driveIm[m];
    }
  }
  return { modes, drive };
}

/**
 * Runs the bank over the readings, once for all recursions that will be tried.
 *
 * shapes  values (nc) of (ticks), complete; blocks ascending and disjoint
 * units   standardised
 * throws  nothing
 * source  file head
 * cost    O(T nc p)
 */
export function recursionInput(
  values: readonly Float64Array[],
  blocks: readonly Block[],
  bank: Bank,
  aloneShare: number,
): RecursionInput {
  const nc = values.length;
  const changes = values.map((y) => Float64Array.from(y, (value, t) => (t === 0 ? 0 : value - y[t - 1])));
  const origins = blocks.reduce((sum, { fromIndex, toIndex }) => sum + toIndex - fromIndex, 0);
  const recursion = bankRecursion(bank, nc);
  const together = summedProducts(changes, blocks);
  const lagged = changes.map((change, c) => laggedProducts(change, recursion.modes, together[c * nc + c]));
  const excitation = { changes, blocks, origins, together, lagged, aloneShare };
  const run = runOver(recursion, excitation, new Float64Array(recursion.modes.size));
  const start = Float64Array.from(values, (y) => -y[0]);
  const levels = runOver(levelRecursion(nc), excitation, start);
  return {
    ...excitation,
    bank: run,
    levels,
    covariance: products(excitation, run, run, aloneShare),
    levelCovariance: summedProducts(values, blocks).map((sum, at) => {
      return (sum * (at % (nc + 1) === 0 ? 1 + aloneShare : 1)) / origins;
    }),
    levelsWithBank: products(excitation, levels, run, 0),
  };
}

/**
 * Moments of a recursion.
 *
 * shapes  recursion with as many inputs as there are channels
 * units   standardised
 * throws  nothing; an unstable recursion gives numbers that are not finite
 * source  file head
 * cost    O(T d nc) + O(d² + d p)
 */
export function recursionMoments(input: RecursionInput, recursion: ModalRecursion): RecursionMoments {
  const run = runOver(recursion, input, new Float64Array(recursion.modes.size));
  return {
    covariance: products(input, run, run, input.aloneShare),
    withBank: products(input, run, input.bank, input.aloneShare),
    withLevels: products(input, run, input.levels, 0),
  };
}

/** Numbers of a channel. */
function perChannelOf(bank: Bank): number {
  return bank.decays.length + 2 * bank.resonators.length;
}

/** −z of every channel as a recursion: pole 1, drive −1. */
function levelRecursion(channels: number): ModalRecursion {
  const drive = new Float64Array(channels * channels);
  for (let c = 0; c < channels; c++) drive[c * channels + c] = -1;
  const modes = {
    size: channels,
    first: Int32Array.from({ length: channels }, (_, c) => c),
    isComplex: new Uint8Array(channels),
    re: new Float64Array(channels).fill(1),
    im: new Float64Array(channels),
  };
  return { modes, drive };
}

/** (nc × nc) Σ over the origins of all blocks. */
function summedProducts(series: readonly Float64Array[], blocks: readonly Block[]): Float64Array {
  const nc = series.length;
  const out = new Float64Array(nc * nc);
  for (let c = 0; c < nc; c++) {
    for (let i = 0; i <= c; i++) {
      let sum = 0;
      for (const { fromIndex, toIndex } of blocks) sum += dotShifted(series[c], series[i], fromIndex, toIndex, 0);
      out[c * nc + i] = sum;
      out[i * nc + c] = sum;
    }
  }
  return out;
}

/**
 * Mean products of two runs' numbers at the origins, (left × right). Levels, which forget nothing, are no stationary series:
 * of channels that move alone they are taken to be apart from all else.
 */
function products(input: Excitation, left: Run, right: Run, aloneShare: number): Float64Array {
  const nc = input.changes.length;
  const [n, m] = [left.recursion.modes.size, right.recursion.modes.size];
  const ends = new Float64Array(n * m);
  left.before.forEach((before, b) => {
    addOuter(ends, before, right.before[b], 1);
    addOuter(ends, left.after[b], right.after[b], -1);
  });
  const rightDrive = transpose(right.recursion.drive, m, nc);
  // F E G', then F N G_drive' + (G_left) (N_right)' F_right' + G D G'.
  const moved = applyModes(left.recursion.modes, ends, m);
  const known = applyRight(moved, right.recursion.modes, n);
  const ahead = multiply(applyModes(left.recursion.modes, left.ahead, nc), rightDrive, n, nc, m);
  const behind = multiply(
    left.recursion.drive,
    transpose(applyModes(right.recursion.modes, right.ahead, nc), m, nc),
    n,
    nc,
    m,
  );
  const driven = multiply(multiply(left.recursion.drive, input.together, n, nc, nc), rightDrive, n, nc, m);
  for (let k = 0; k < known.length; k++) known[k] += ahead[k] + behind[k] + driven[k];
  if (aloneShare > 0) addAlone(left, right, input.together, aloneShare, known);
  return solveStein(left.recursion.modes, right.recursion.modes, known).map((sum) => sum / input.origins);
}

/** X G', with G by its modes. */
function applyRight(x: Float64Array, modes: Modes, rows: number): Float64Array {
  return transpose(applyModes(modes, transpose(x, rows, modes.size), rows), modes.size, rows);
}

function addOuter(into: Float64Array, a: Float64Array, b: Float64Array, sign: number): void {
  for (let i = 0; i < a.length; i++) {
    const weight = sign * a[i];
    const at = i * b.length;
    for (let j = 0; j < b.length; j++) into[at + j] += weight * b[j];
  }
}

/** Runs from the first reading on, through the gaps between blocks. */
function runOver(recursion: ModalRecursion, { changes, blocks, lagged }: Excitation, start: Float64Array): Run {
  const n = recursion.modes.size;
  const nc = changes.length;
  const drive = transpose(recursion.drive, n, nc);
  const rows = changes.map((_, c) => drive.subarray(c * n, (c + 1) * n));
  const ahead = changes.map(() => new Float64Array(n));
  const before: Float64Array[] = [];
  const after: Float64Array[] = [];
  const s = start.slice();
  let t = 0;
  const advance = (): void => {
    t++;
    stepModes(recursion.modes, s);
    for (let c = 0; c < nc; c++) addScaled(s, rows[c], changes[c][t]);
  };
  for (const { fromIndex, toIndex } of blocks) {
    while (t < fromIndex - 1) advance();
    before.push(s.slice());
    while (t < toIndex - 1) {
      for (let c = 0; c < nc; c++) addScaled(ahead[c], s, changes[c][t + 1]);
      advance();
    }
    after.push(s.slice());
  }
  const joined = new Float64Array(nc * n);
  ahead.forEach((row, c) => {
    joined.set(row, c * n);
  });
  return { recursion, before, after, ahead: transpose(joined, nc, n), alone: aheadAlone(recursion, lagged) };
}

function addScaled(into: Float64Array, what: Float64Array, by: number): void {
  if (by === 0) return;
  for (let k = 0; k < into.length; k++) into[k] += by * what[k];
}
