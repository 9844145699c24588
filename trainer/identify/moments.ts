/**
 * Second moments of the bank's features and of the future, exact over any block of origins and additive over blocks.
 *
 * Every feature obeys φ(t) = a φ(t-1) - a g Δ(t) with Δ(t) = y(t) - y(t-1), its pole a and g = (1 - |a|)/(1 - a). So one
 * product per tick, features against the readings' changes one horizon ahead, is enough: all nearer horizons follow
 * backwards by the feature's own recursion, and the features' products among themselves solve a scalar Stein equation.
 * Both carry exact terms for the block's two ends. Quicker than products of all features by the ratio of features to
 * channels, and equal to them to rounding. Lags are no recursions of their own; their moments are joined after.
 */
import { type Bank, featureCount } from './bank.ts';
import { carryBlock } from './carry-block.ts';
import { dotShifted, joinPoles, productsOfChanges, shiftBack } from './cross-steps.ts';
import { type LagBlock, putLags, ringsOf } from './lag-moments.ts';
import { advancePoles, flattenPoles, type Poles } from './poles.ts';
import { featureProducts } from './stein.ts';

/** Sums over the origins of a block, not means. */
export interface Moments {
  readonly origins: number;
  /** (p × p) features by features, p = nc·F. */
  readonly features: Float64Array;
  /** (p × ny·H) features by changes y_i(t+h) - y_i(t); column i·H + h - 1. */
  readonly future: Float64Array;
  /** (ny·H) squared changes. */
  readonly energy: Float64Array;
  /** (p) features. */
  readonly featureSums: Float64Array;
  /** (ny·H) changes. */
  readonly futureSums: Float64Array;
}

/** Where moments are taken: `values` (nc) of (ticks), complete and standardised. */
export interface MomentInput {
  readonly values: readonly Float64Array[];
  readonly signalCount: number;
  readonly bank: Bank;
  readonly horizon: number;
}

/** Origins fromIndex <= t < toIndex, indices into `values`; fromIndex >= 1 and toIndex - 1 + horizon inside them. */
export interface Block {
  readonly fromIndex: number;
  readonly toIndex: number;
}

/**
 * Moments of every block, in one pass over the readings.
 *
 * shapes  blocks ascending and disjoint; result one entry a block
 * units   values standardised; sums over origins
 * throws  RangeError if a block reaches outside the readings
 * source  recursion of the cross moments: own derivation, checked in the tests against direct products; Stein equation of
 *         a filter bank's covariance: Byrnes, Georgiou & Lindquist, IEEE Trans. Signal Processing 48 (2000), section II
 * cost    O(T nc (p + nc H)) + O(p nc H + p²) a block
 */
export function gatherMoments(input: MomentInput, blocks: readonly Block[]): Moments[] {
  return [...momentsIn(input, blocks, () => roomFor(input))];
}

/**
 * The same, one block at a time, for those who add them up: the next is written over the last.
 *
 * shapes  as `gatherMoments`
 * units   as `gatherMoments`
 * throws  as `gatherMoments`
 * source  as `gatherMoments`
 * cost    as `gatherMoments`; memory of one block
 */
export function eachMoments(input: MomentInput, blocks: readonly Block[]): Generator<Moments> {
  const room = roomFor(input);
  return momentsIn(input, blocks, () => room);
}

/** Where the moments of a block are written, all of it. */
type Room = Omit<Moments, 'origins'>;

function roomFor({ values, signalCount, bank, horizon }: MomentInput): Room {
  const p = values.length * featureCount(bank);
  const width = signalCount * horizon;
  return {
    features: new Float64Array(p * p),
    future: new Float64Array(p * width),
    energy: new Float64Array(width),
    featureSums: new Float64Array(p),
    futureSums: new Float64Array(width),
  };
}

function* momentsIn(input: MomentInput, blocks: readonly Block[], nextRoom: () => Room): Generator<Moments> {
  const { values, bank, horizon, signalCount } = input;
  const ticks = values[0].length;
  for (const block of blocks) {
    if (block.fromIndex >= 1 && block.toIndex > block.fromIndex && block.toIndex - 1 + horizon < ticks) continue;
    throw new RangeError(
      `Block ${block.fromIndex}..${block.toIndex} with horizon ${horizon} leaves the ${ticks} ticks.`,
    );
  }
  const rings = ringsOf(values, bank.lags);
  const poles = flattenPoles(bank);
  const changes = values.map(difference);
  const perChannel = featureCount({ ...bank, lags: [] });
  const phi = new Float64Array(values.length * perChannel);
  if (poles.level >= 0) {
    for (let c = 0; c < values.length; c++) phi[c * perChannel + poles.feature[poles.level]] = -values[c][0];
  }
  const stepwise = new Float64Array(horizon * signalCount * phi.length);
  let at = 1;
  for (const block of blocks) {
    for (; at < block.fromIndex; at++) advancePoles(poles, phi, changes, at);
    const before = phi.slice();
    const cross = carryBlock(poles, phi, changes, at, block.toIndex, horizon);
    at = block.toIndex;
    const of = { input, block, poles, changes, rings, before, after: phi, cross };
    yield { ...closeBlock(of, stepwise, nextRoom()), origins: block.toIndex - block.fromIndex };
  }
}

function difference(y: Float64Array): Float64Array {
  const out = new Float64Array(y.length);
  for (let t = 1; t < y.length; t++) out[t] = y[t] - y[t - 1];
  return out;
}

/** Writes a block's moments, each channel's lags after its recursive features; `cross` comes one horizon ahead. */
function closeBlock(of: LagBlock, stepwise: Float64Array, room: Room): Room {
  const { input, block, poles, changes, rings, before, after, cross } = of;
  const nc = changes.length;
  const p = before.length;
  const each = p / nc + rings.lags.length;
  const { horizon, signalCount } = input;
  const lagged = productsOfChanges(changes, block, horizon);
  for (let k = horizon; k >= 1; k--) {
    if (k < horizon) {
      shiftBack(cross, changes, block, before, after, k);
      joinPoles(poles, cross, nc, lagged.subarray(k * nc * nc));
    }
    stepwise.set(cross.subarray(0, signalCount * p), (k - 1) * signalCount * p);
  }
  shiftBack(cross, changes, block, before, after, 0);
  const simultaneous = lagged.subarray(0, nc * nc);
  const levels = productsOfLevels(input, poles, block);
  featureProducts(poles, nc, before, after, cross, simultaneous, levels, each, room.features);
  sumAhead(stepwise, p, p / nc, each, signalCount, horizon, room.future);
  sumFeatures(of, each, room.featureSums);
  sumEnergy(input, block, room.energy);
  sumFuture(input, block, room.futureSums);
  if (rings.lags.length > 0) putLags(of, room);
  return room;
}

/**
 * From Σ φ_f(t) Δ_i(t+k), laid (H × ny × p), to Σ φ_f(t) (y_i(t+h) - y_i(t)), laid (nc·each × ny·H), F rows a channel: a
 * running sum over steps. Eight features at a time, since either side read one by one would miss the cache at every number.
 */
function sumAhead(
  stepwise: Float64Array,
  p: number,
  F: number,
  each: number,
  signalCount: number,
  horizon: number,
  out: Float64Array,
): void {
  const tile = 8;
  const width = signalCount * horizon;
  const sums = new Float64Array(tile);
  const rows = new Int32Array(tile);
  for (let first = 0; first < p; first += tile) {
    const count = Math.min(tile, p - first);
    for (let j = 0; j < count; j++) rows[j] = (Math.floor((first + j) / F) * each + ((first + j) % F)) * width;
    for (let i = 0; i < signalCount; i++) {
      sums.fill(0);
      for (let k = 0; k < horizon; k++) {
        const from = (k * signalCount + i) * p + first;
        for (let j = 0; j < count; j++) {
          sums[j] += stepwise[from + j];
          out[rows[j] + i * horizon + k] = sums[j];
        }
      }
    }
  }
}

/** (nc × nc) Σ z_i(t) z_j(t), on and below the diagonal; zeros where the bank has no level. */
function productsOfLevels({ values }: MomentInput, poles: Poles, block: Block): Float64Array {
  const out = new Float64Array(values.length * values.length);
  if (poles.level < 0) return out;
  for (let i = 0; i < values.length; i++) {
    for (let j = 0; j <= i; j++) {
      out[i * values.length + j] = dotShifted(values[i], values[j], block.fromIndex, block.toIndex, 0);
    }
  }
  return out;
}

/** Σ φ(t): φ(t) = a φ(t-1) + drive Δ(t) summed, so (1 - a) Σ φ = a (before - after) + drive Σ Δ. */
function sumFeatures({ input, block, poles, changes, before, after }: LagBlock, each: number, out: Float64Array): void {
  const perChannel = before.length / changes.length;
  for (let c = 0; c < changes.length; c++) {
    const change = changes[c];
    let moved = 0;
    for (let t = block.fromIndex; t < block.toIndex; t++) moved += change[t];
    for (let m = 0; m < poles.count; m++) {
      const f = c * perChannel + poles.feature[m];
      const to = c * each + poles.feature[m];
      if (m === poles.level) {
        const y = input.values[c];
        let sum = 0;
        for (let t = block.fromIndex; t < block.toIndex; t++) sum -= y[t];
        out[to] = sum;
        continue;
      }
      const aRe = poles.poleRe[m];
      const aIm = poles.poleIm[m];
      const xRe = before[f] - after[f];
      const xIm = poles.isComplex[m] === 1 ? before[f + 1] - after[f + 1] : 0;
      const re = aRe * xRe - aIm * xIm + poles.driveRe[m] * moved;
      const im = aRe * xIm + aIm * xRe + poles.driveIm[m] * moved;
      const size = (1 - aRe) * (1 - aRe) + aIm * aIm;
      out[to] = (re * (1 - aRe) - im * aIm) / size;
      if (poles.isComplex[m] === 1) out[to + 1] = (im * (1 - aRe) + re * aIm) / size;
    }
  }
}

/** (ny·H) Σ y(t+h) - y(t), from one step to the next by the two ends. */
function sumFuture({ values, signalCount, horizon }: MomentInput, block: Block, out: Float64Array): void {
  for (let i = 0; i < signalCount; i++) {
    const y = values[i];
    let sum = 0;
    for (let h = 1; h <= horizon; h++) {
      sum += y[block.toIndex - 1 + h] - y[block.fromIndex - 1 + h];
      out[i * horizon + h - 1] = sum;
    }
  }
}

/** (ny·H) Σ (y(t+h) - y(t))². */
function sumEnergy({ values, signalCount, horizon }: MomentInput, block: Block, out: Float64Array): void {
  for (let i = 0; i < signalCount; i++) {
    const y = values[i];
    let h = 1;
    // Four steps together: their sums do not wait for one another.
    for (; h + 3 <= horizon; h += 4) {
      let s0 = 0;
      let s1 = 0;
      let s2 = 0;
      let s3 = 0;
      for (let t = block.fromIndex; t < block.toIndex; t++) {
        const now = y[t];
        const u = t + h;
        s0 += (y[u] - now) * (y[u] - now);
        s1 += (y[u + 1] - now) * (y[u + 1] - now);
        s2 += (y[u + 2] - now) * (y[u + 2] - now);
        s3 += (y[u + 3] - now) * (y[u + 3] - now);
      }
      const at = i * horizon + h - 1;
      out[at] = s0;
      out[at + 1] = s1;
      out[at + 2] = s2;
      out[at + 3] = s3;
    }
    for (; h <= horizon; h++) {
      let sum = 0;
      for (let t = block.fromIndex; t < block.toIndex; t++) sum += (y[t + h] - y[t]) * (y[t + h] - y[t]);
      out[i * horizon + h - 1] = sum;
    }
  }
}
