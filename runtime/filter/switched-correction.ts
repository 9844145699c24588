/**
 * What the mean path is known to miss: rectified random features of the section's state, a linear read-out, a few curves
 * over the horizon. The features' weights come from a fixed integer generator and cost no bytes. Everything is clipped, so
 * that far from what was learned the correction can only be small.
 */
import { multiply } from './dense.ts';
import type { SwitchedSection } from './switched-section.ts';
import type { SwitchedCore } from './switched-step.ts';

/** Largest size of a rectified feature. */
const FEATURE_MOST = 6;
/** Scales of the summary's parts, so that each varies by about one. */
const VALUE_SCALE = 1.5;
const BELIEF_SCALE = 1.5;
const MEAN_SCALE = 0.5;
const MEAN_MOST = 4;
const DOUBT_MOST = 3;
const SIZE_MOST = 8;

/** Buffers of the correction. */
export interface CorrectionBuffers {
  /** (summary) and (D × summary), (D). */
  readonly summary: Float64Array;
  readonly weights: Float64Array;
  readonly offsets: Float64Array;
  /** (D + 1 + summary), (q·c), (H) */
  readonly features: Float64Array;
  readonly coefficients: Float64Array;
  readonly path: Float64Array;
}

/** Numbers in the summary: driven values, beliefs, means, dwell, doubts. */
export function summaryLength(section: SwitchedSection): number {
  return 2 * section.driven.length + section.modeCount + section.featureScale.length + 1;
}

/**
 * Buffers, with the features' weights drawn.
 *
 * shapes  as CorrectionBuffers
 * source  xorshift32, Marsaglia (2003), Xorshift RNGs, triple (13, 17, 5)
 */
export function createCorrection(section: SwitchedSection, count: number, horizon: number): CorrectionBuffers {
  const width = summaryLength(section);
  let x = 2463534242 | 0;
  const draw = (): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) / 2147483648 - 1;
  };
  const weights = new Float64Array(count * width);
  const offsets = new Float64Array(count);
  for (let d = 0; d < count; d++) {
    for (let k = 0; k < width; k++) weights[d * width + k] = draw();
    offsets[d] = 1.5 * draw();
  }
  const features = count + 1 + width;
  return {
    summary: new Float64Array(width),
    weights,
    offsets,
    features: new Float64Array(features),
    coefficients: new Float64Array(section.correction.readout.length / features),
    path: new Float64Array(horizon),
  };
}

/**
 * Features of the section's state.
 *
 * shapes  value (nc) of the tick folded in; buffers.features (D + 1 + summary)
 * cost    O(D · summary); allocates nothing
 */
export function writeCorrectionFeatures(
  section: SwitchedSection,
  core: SwitchedCore,
  buffers: CorrectionBuffers,
  value: Float64Array,
): void {
  const { summary, weights, offsets, features } = buffers;
  const count = offsets.length;
  writeSummary(section, core, summary, value);
  multiply(weights, count, summary.length, summary, 0, features, 0);
  for (let d = 0; d < count; d++) {
    const raw = features[d] + offsets[d];
    features[d] = raw < 0 ? 0 : Math.min(raw, FEATURE_MOST);
  }
  features[count] = 1;
  for (let k = 0; k < summary.length; k++) features[count + 1 + k] = summary[k];
}

function writeSummary(section: SwitchedSection, core: SwitchedCore, summary: Float64Array, value: Float64Array): void {
  const { driven, modeCount, featureScale } = section;
  let at = 0;
  for (let i = 0; i < driven.length; i++) summary[at++] = clipped(VALUE_SCALE * value[driven[i]], SIZE_MOST);
  for (let m = 0; m < modeCount; m++) summary[at++] = BELIEF_SCALE * core.memory[core.beliefAt + m];
  for (let f = 0; f < featureScale.length; f++) summary[at++] = MEAN_SCALE * clipped(core.features[f], MEAN_MOST);
  summary[at++] = core.memory[core.dwellAt] / section.dwellLimit;
  for (let i = 0; i < driven.length; i++) summary[at++] = MEAN_SCALE * clipped(core.doubt[i], DOUBT_MOST);
}

function clipped(value: number, most: number): number {
  return value > most ? most : Math.max(value, -most);
}

/**
 * Adds the correction to the paths of the forecast signals, by the section's share in them.
 *
 * shapes  value (nc); out (ny × steps)
 * cost    O(D · (summary + q·c) + q · steps · c); allocates nothing
 */
export function correct(
  section: SwitchedSection,
  core: SwitchedCore,
  buffers: CorrectionBuffers,
  value: Float64Array,
  horizon: number,
  steps: number,
  out: Float64Array,
): void {
  const { correction, forecast } = section;
  const { features, coefficients, path } = buffers;
  if (coefficients.length === 0) return;
  writeCorrectionFeatures(section, core, buffers, value);
  multiply(correction.readout, coefficients.length, features.length, features, 0, coefficients, 0);
  const c = coefficients.length / forecast.length;
  for (let q = 0; q < forecast.length; q++) {
    multiply(correction.basis, steps, c, coefficients, q * c, path, 0);
    const limit = correction.limit[q];
    const at = forecast[q] * steps;
    for (let h = 0; h < steps; h++) out[at + h] += section.share[q * horizon + h] * clipped(path[h], limit);
  }
}
