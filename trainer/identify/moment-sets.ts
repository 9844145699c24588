/**
 * Moments added, and cut down to some features or some steps: what makes folds and banks cheap to try.
 */
import type { Moments } from './moments.ts';
import type { Layout } from './ridge.ts';

/**
 * The sum of several blocks' moments.
 *
 * shapes  all alike
 * units   sums over origins
 * throws  RangeError if there are none
 * source  moments are additive over disjoint blocks
 * cost    O(p² + p ny H) a block
 */
export function addMoments(parts: readonly Moments[]): Moments {
  if (parts.length === 0) throw new RangeError('No moments to add.');
  if (parts.length === 1) return parts[0];
  const features = parts[0].features.slice();
  const future = parts[0].future.slice();
  const energy = parts[0].energy.slice();
  const featureSums = parts[0].featureSums.slice();
  const futureSums = parts[0].futureSums.slice();
  let origins = parts[0].origins;
  for (const part of parts.slice(1)) {
    origins += part.origins;
    addTo(features, part.features);
    addTo(future, part.future);
    addTo(energy, part.energy);
    addTo(featureSums, part.featureSums);
    addTo(futureSums, part.futureSums);
  }
  return { origins, features, future, energy, featureSums, futureSums };
}

/**
 * Adds a block's moments into a sum, in place where there is one.
 *
 * shapes  alike; sum null: nothing yet, and the result is a copy
 * units   sums over origins
 * throws  nothing
 * source  as `addMoments`
 * cost    as `addMoments`
 */
export function addInto(sum: Moments | null, part: Moments): Moments {
  if (sum === null) return copyOf(part);
  for (const key of ['features', 'future', 'energy', 'featureSums', 'futureSums'] as const) addTo(sum[key], part[key]);
  return { ...sum, origins: sum.origins + part.origins };
}

function copyOf({ origins, features, future, energy, featureSums, futureSums }: Moments): Moments {
  return {
    origins,
    features: features.slice(),
    future: future.slice(),
    energy: energy.slice(),
    featureSums: featureSums.slice(),
    futureSums: futureSums.slice(),
  };
}

/**
 * Moments of some features a channel and some steps.
 *
 * shapes  kept ascending feature indices within a channel; steps ascending, 1..H
 * units   as the moments
 * throws  nothing
 * source  a principal submatrix
 * cost    the size of the result
 */
export function pickMoments(
  moments: Moments,
  layout: Layout,
  kept: readonly number[],
  steps: readonly number[],
): Moments {
  const { channelCount, signalCount, featureCount } = layout;
  const p = channelCount * featureCount;
  const width = signalCount * layout.steps;
  const rows = new Int32Array(channelCount * kept.length);
  for (let a = 0; a < rows.length; a++) {
    rows[a] = Math.floor(a / kept.length) * featureCount + kept[a % kept.length];
  }
  const cols = new Int32Array(signalCount * steps.length);
  for (let b = 0; b < cols.length; b++) {
    cols[b] = Math.floor(b / steps.length) * layout.steps + steps[b % steps.length] - 1;
  }
  const features = new Float64Array(rows.length * rows.length);
  const future = new Float64Array(rows.length * cols.length);
  for (let a = 0; a < rows.length; a++) {
    const from = rows[a] * p;
    for (let b = 0; b < rows.length; b++) features[a * rows.length + b] = moments.features[from + rows[b]];
    const ahead = rows[a] * width;
    for (let b = 0; b < cols.length; b++) future[a * cols.length + b] = moments.future[ahead + cols[b]];
  }
  return {
    origins: moments.origins,
    features,
    future,
    energy: Float64Array.from(cols, (col) => moments.energy[col]),
    featureSums: Float64Array.from(rows, (row) => moments.featureSums[row]),
    futureSums: Float64Array.from(cols, (col) => moments.futureSums[col]),
  };
}

function addTo(into: Float64Array, what: Float64Array): void {
  for (let k = 0; k < into.length; k++) into[k] += what[k];
}

/**
 * Sums about the means: what a fit with a constant term would see of features and future. The energy is left as it is.
 *
 * shapes  as the moments
 * units   as the moments
 * throws  nothing
 * source  definition
 * cost    O(p² + p ny H)
 */
export function aboutMeans(moments: Moments): Moments {
  const { origins, featureSums, futureSums } = moments;
  const features = moments.features.slice();
  const future = moments.future.slice();
  const p = featureSums.length;
  const width = futureSums.length;
  for (let f = 0; f < p; f++) {
    const mean = featureSums[f] / origins;
    for (let g = 0; g < p; g++) features[f * p + g] -= mean * featureSums[g];
    for (let k = 0; k < width; k++) future[f * width + k] -= mean * futureSums[k];
  }
  return { ...moments, features, future };
}
