/**
 * The filter by another road, slow and obvious: features by direct convolution over the whole past, dense products by
 * plain loops, no recursion. Assumes a past that was constant before the first tick, as the filter's start does.
 */
import type { LinearModel } from '@stillwell/runtime/filter';

/** Features of channel c after the folded-in values z[0..t], unclipped, scaled. */
export function slowFeatures(model: LinearModel, z: readonly number[], channel: number): number[] {
  const t = z.length - 1;
  const at = (k: number): number => (k < 0 ? z[0] : z[k]);
  const now = z[t];
  // Long enough for the slowest memory to have forgotten what lies before.
  const reach = t + 40_000;
  const raw: number[] = [];
  for (const a of model.decays) {
    let sum = 0;
    let weight = 1 - a;
    for (let j = 0; j <= reach; j++, weight *= a) sum += weight * at(t - j);
    raw.push(sum - now);
  }
  model.resonatorRe.forEach((re, k) => {
    const im = model.resonatorIm[k];
    const gain = 1 - Math.hypot(re, im);
    // Σ_j gain c^j (z(t−j) − z(t)): the steady part is subtracted term by term.
    let powerRe = gain;
    let powerIm = 0;
    let sumRe = 0;
    let sumIm = 0;
    for (let j = 0; j <= reach; j++) {
      sumRe += powerRe * (at(t - j) - now);
      sumIm += powerIm * (at(t - j) - now);
      [powerRe, powerIm] = [powerRe * re - powerIm * im, powerRe * im + powerIm * re];
    }
    raw.push(sumRe, sumIm);
  });
  if (model.level === true) raw.push(-now);
  for (const lag of model.lags) raw.push(at(t - lag) - now);
  return raw.map((feature, k) => feature * model.featureScale[channel * model.featureCount + k]);
}

/** Unclipped path of one signal in standardised units, from the features of all channels and the value of the signal now. */
export function slowPath(model: LinearModel, features: readonly number[], signal: number, now: number): number[] {
  const { order, basisCount, horizon, featureCount: F, own } = model;
  const x = Array.from({ length: order }, (_, s) =>
    features.reduce((sum, feature, f) => sum + feature * model.bottleneck[s * features.length + f], 0),
  );
  const past = [...features.slice(signal * F, (signal + 1) * F), ...features.slice(model.signalCount * F)];
  const coefficients = Array.from({ length: basisCount }, (_, k) => {
    const row = signal * basisCount + k;
    const joint = x.reduce((sum, value, s) => sum + value * model.readout[row * order + s], 0);
    return own === undefined ? joint : past.reduce((sum, value, f) => sum + value * own[row * past.length + f], joint);
  });
  return Array.from({ length: horizon }, (_, h) =>
    coefficients.reduce((sum, value, k) => sum + value * model.horizonBasis[h * basisCount + k], now),
  );
}
