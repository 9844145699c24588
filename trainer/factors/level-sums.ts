/**
 * What the level and the ring lags add to the moments. A lag is minus the sum of the changes since then, the future the sum of
 * those to come, so both are running sums over products of two changes, or of a level and a change, at all distances; their
 * products with a recursive feature follow each other backwards by that feature's own recursion.
 */
import type { Bank } from '../identify/bank.ts';
import { featureCount } from '../identify/bank.ts';
import type { Moments } from '../identify/moments.ts';
import type { PairSums, Path, SumsShape } from './pair-sums.ts';
import { type PoleShape, turn } from './pole-sums.ts';
import { changeAt, type RecursiveSums } from './recursive-sums.ts';

/** All that is known when levels and lags are joined. */
export interface LevelInput {
  readonly shape: SumsShape;
  readonly poleShape: PoleShape;
  readonly pairs: PairSums;
  readonly paths: readonly Path[];
  readonly recursive: RecursiveSums;
  readonly bank: Bank;
  readonly signalCount: number;
  /** (nc) mean less offset, rounds taken away. */
  readonly means: readonly number[];
  /** Where they are written, raw. */
  readonly out: Moments;
}

/**
 * Writes levels, lags, sums and energies into the moments.
 *
 * shapes  as Moments
 * units   raw
 * throws  nothing
 * source  file head
 * cost    O(nc² (lags (lags + H) longest lag)) + O(nc² F longest lag)
 */
export function addLagsAndLevels(input: LevelInput): void {
  const { poleShape, pairs } = input;
  const { channels } = poleShape;
  for (let i = 0; i < input.signalCount; i++) addFuture(input, i);
  for (let c = 0; c < channels; c++) {
    for (let d = 0; d < channels; d++) {
      if (input.bank.lags.length > 0) addLagPair(input, c, d);
      if (input.bank.hasLevel === true) addLevelPair(input, c, d);
    }
    pairs.clear();
  }
  addFeatureSums(input);
}

/** Sums and energies of one signal's future. */
function addFuture({ shape, pairs, out }: LevelInput, i: number): void {
  const { horizon, growth, factors } = shape;
  let energy = 0;
  let sum = 0;
  for (let h = 1; h <= horizon; h++) {
    let more = pairs.product('change', i, -h, 'change', i, h);
    for (let k = 1; k < h; k++) more += 2 * pairs.product('change', i, -k, 'change', i, h);
    energy += more;
    sum += pairs.single('change', i, h, i);
    // Before the first origin the run stood still, and only its head moves.
    const head = factors.sums.headEnergy[i * factors.longestHorizon + h - 1] * growth ** -h;
    out.energy[i * horizon + h - 1] = energy - head;
    out.futureSums[i * horizon + h - 1] = sum;
  }
}

/** Lags of channel c against channel d: its lags, its recursive features, its future. */
function addLagPair(input: LevelInput, c: number, d: number): void {
  const { shape, poleShape, pairs, bank, signalCount, out } = input;
  const { horizon } = shape;
  const features = featureCount(bank);
  const p = poleShape.channels * features;
  const width = signalCount * horizon;
  const longest = bank.lags[bank.lags.length - 1];
  const place = (channel: number, n: number): number => (channel + 1) * features - bank.lags.length + n;
  if (d <= c) {
    // Row by row: Σ over m < l of products of D_c(t - m) with D_d(t - m'), m' < l'.
    const columns = new Float64Array(longest);
    for (let m = 0; m < longest; m++) {
      for (let n = 0; n < longest; n++) columns[n] += pairs.product('change', c, m, 'change', d, -n);
      const own = bank.lags.indexOf(m + 1);
      if (own < 0) continue;
      let sum = 0;
      for (let n = 0; n < longest; n++) {
        sum += columns[n];
        const other = bank.lags.indexOf(n + 1);
        if (other < 0) continue;
        out.features[place(c, own) * p + place(d, other)] = sum;
        out.features[place(d, other) * p + place(c, own)] = sum;
      }
    }
  }
  if (d < signalCount) {
    const columns = new Float64Array(horizon);
    for (let m = 0; m < longest; m++) {
      for (let k = 1; k <= horizon; k++) columns[k - 1] += pairs.product('change', c, m, 'change', d, k);
      const own = bank.lags.indexOf(m + 1);
      if (own < 0) continue;
      let sum = 0;
      for (let k = 0; k < horizon; k++) {
        sum -= columns[k];
        out.future[place(c, own) * width + d * horizon + k] = sum;
      }
    }
  }
  addLagsOfPoles(input, d, c);
}

/** Lags of channel d against the recursive features of channel c. */
function addLagsOfPoles(
  { shape, poleShape, pairs, paths, recursive, bank, out }: LevelInput,
  d: number,
  c: number,
): void {
  const { horizon, round, roundWeights, growth } = shape;
  const { channels, perChannel } = poleShape;
  const features = featureCount(bank);
  const p = channels * features;
  const q = channels * perChannel;
  const longest = bank.lags[bank.lags.length - 1];
  const own = c * perChannel;
  const moved = new Float64Array(perChannel);
  const sums = new Float64Array(perChannel);
  let from = recursive.before.slice(d * q + own, d * q + own + perChannel);
  for (let m = 0; m < longest; m++) {
    turn(poleShape, from, 0, 1, pairs.product('change', c, 0, 'change', d, -m), moved, 0);
    for (let f = 0; f < perChannel; f++) sums[f] -= moved[f];
    // Σ w(t) φ(t-1) D(t - m - 1).
    from = moved.slice();
    paths.forEach((path, r) => {
      const change = changeAt(path, d, horizon + m, round, roundWeights[d]);
      for (let f = 0; f < perChannel; f++) from[f] -= recursive.atEnds[r][own + f] * change;
    });
    for (let f = 0; f < perChannel; f++) from[f] *= growth;
    const n = bank.lags.indexOf(m + 1);
    if (n < 0) continue;
    const row = (d + 1) * features - bank.lags.length + n;
    for (let f = 0; f < perChannel; f++) {
      const col = c * features + f;
      out.features[row * p + col] = sums[f];
      out.features[col * p + row] = sums[f];
    }
  }
}

/** The level of channel c, its mean less itself, against everything of channel d. */
function addLevelPair(input: LevelInput, c: number, d: number): void {
  const { shape, poleShape, pairs, bank, signalCount, means, out } = input;
  const { horizon } = shape;
  const features = featureCount(bank);
  const p = poleShape.channels * features;
  const width = signalCount * horizon;
  const row = c * features + poleShape.perChannel;
  const write = (col: number, value: number): void => {
    out.features[row * p + col] = value;
    out.features[col * p + row] = value;
  };
  const both = pairs.product('level', c, 0, 'level', d, 0);
  const own = pairs.single('level', c, 0, d);
  const other = pairs.single('level', d, 0, c);
  write(
    d * features + poleShape.perChannel,
    both - means[d] * own - means[c] * other + means[c] * means[d] * pairs.count(c, d),
  );
  const longest = Math.max(0, ...bank.lags);
  let back = 0;
  for (let m = 0; m < longest; m++) {
    back += pairs.product('level', c, 0, 'change', d, -m) - means[c] * pairs.single('change', d, -m, c);
    const n = bank.lags.indexOf(m + 1);
    if (n >= 0) write((d + 1) * features - bank.lags.length + n, back);
  }
  if (d < signalCount) {
    let ahead = 0;
    for (let k = 1; k <= horizon; k++) {
      ahead += means[c] * pairs.single('change', d, k, c) - pairs.product('level', c, 0, 'change', d, k);
      out.future[row * width + d * horizon + k - 1] = ahead;
    }
  }
  const poles = levelsOfPoles(input, c, d);
  const sums = sumsOfPoles(input, d, c);
  for (let f = 0; f < poleShape.perChannel; f++) write(d * features + f, means[c] * sums[f] - poles[f]);
}

/**
 * (perChannel) Σ w(t) φ(t) u_c(t) over the recursive features of channel d:
 * (1 - a β) Σ φ u_c = -a β (ends) + a Σ φ(t-1) D_c(t) + drive Σ D_d(t) u_c(t).
 */
function levelsOfPoles({ shape, poleShape, pairs, paths, recursive }: LevelInput, c: number, d: number): Float64Array {
  const { horizon, round, roundWeights, growth } = shape;
  const { channels, perChannel } = poleShape;
  const q = channels * perChannel;
  const own = d * perChannel;
  const from = new Float64Array(perChannel);
  for (let f = 0; f < perChannel; f++) from[f] = recursive.before[c * q + own + f];
  paths.forEach((path, r) => {
    const { levels } = path;
    const level = levels[c][horizon] - (round === 0 ? 0 : roundWeights[c] * levels[c][horizon + round]);
    for (let f = 0; f < perChannel; f++) from[f] -= growth * recursive.atEnds[r][own + f] * level;
  });
  if (recursive.rungOut !== null) {
    for (let f = 0; f < perChannel; f++) from[f] -= growth * recursive.rungOut.levels[c * q + own + f];
  }
  return settle(poleShape, from, pairs.product('level', c, 0, 'change', d, 0), growth);
}

/** (perChannel) Σ w(t) φ(t) of channel d over the runs in which channel c was there. */
function sumsOfPoles({ shape, poleShape, pairs, paths, recursive }: LevelInput, d: number, c: number): Float64Array {
  const { perChannel } = poleShape;
  const own = d * perChannel;
  const from = new Float64Array(perChannel);
  paths.forEach(({ end }, r) => {
    if (end.isThere[c] === 0) return;
    for (let f = 0; f < perChannel; f++) from[f] -= shape.growth * recursive.atEnds[r][own + f];
  });
  if (recursive.rungOut !== null) {
    const at = c * poleShape.channels * perChannel + own;
    for (let f = 0; f < perChannel; f++) from[f] -= shape.growth * recursive.rungOut.there[at + f];
  }
  return settle(poleShape, from, pairs.single('change', d, 0, c), shape.growth);
}

/** x of (1 - a β) x = a · from + drive · moved. */
function settle(shape: PoleShape, from: Float64Array, moved: number, growth: number): Float64Array {
  const { poles } = shape;
  const out = new Float64Array(from.length);
  turn(shape, from, 0, 1, moved, out, 0);
  for (let m = 0; m < poles.count; m++) {
    if (m === poles.level) continue;
    const f = poles.feature[m];
    const re = 1 - growth * poles.poleRe[m];
    if (poles.isComplex[m] === 0) {
      out[f] /= re;
      continue;
    }
    const im = growth * poles.poleIm[m];
    const size = re * re + im * im;
    const x = out[f];
    const y = out[f + 1];
    out[f] = (x * re - y * im) / size;
    out[f + 1] = (y * re + x * im) / size;
  }
  return out;
}

/** Sums of all features. */
function addFeatureSums(input: LevelInput): void {
  const { shape, poleShape, pairs, bank, means, out } = input;
  const features = featureCount(bank);
  const longest = Math.max(0, ...bank.lags);
  for (let c = 0; c < shape.factors.names.length; c++) {
    out.featureSums.set(sumsOfPoles(input, c, c), c * features);
    if (bank.hasLevel === true) {
      out.featureSums[c * features + poleShape.perChannel] =
        means[c] * pairs.count(c, c) - pairs.single('level', c, 0, c);
    }
    let back = 0;
    for (let m = 0; m < longest; m++) {
      back -= pairs.single('change', c, -m, c);
      const n = bank.lags.indexOf(m + 1);
      if (n >= 0) out.featureSums[(c + 1) * features - bank.lags.length + n] = back;
    }
  }
}
