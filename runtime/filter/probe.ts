/**
 * A short run that a bundle's maker and every gateway must reproduce to the bit before the bundle is trusted: it proves
 * that this machine's arithmetic is the maker's. Readings come from an integer generator, so nothing but the filter's own
 * arithmetic is on trial; among them are gaps, spikes and values beyond the clips.
 *
 * Generator: xorshift32 (Marsaglia 2003), state starting at the seed's low 32 bits, or 2463534242 where they are zero:
 * x ^= x << 13; x ^= x >>> 17; x ^= x << 5. For each tick n = 0 … ticks − 1 and each channel in order one draw x, read as
 * an unsigned number: wander ← wander · 15/16 + (x mod 65536 − 32768) / 65536, wander starting at 0; the low three bits
 * of (x >>> 16) and a tick counter choose: bits 0 and n > 2: missing; bits 1 and n mod 16 = 0: wander + 40 (a spike, or
 * beyond the clip); all of channel 0 missing for n mod 64 ≥ 48. Reading = offset + step · round((mean + scale · w −
 * offset) / step), with w the number so made.
 *
 * A model with a response to plans forecasts every path under a plan: input u at step h is the value folded in last of
 * channel (u + h) mod nc.
 *
 * Outputs, float64 little-endian, in order: every tick the one-step predictions made before it (nc, from the second tick
 * on); at every eighth tick (n mod 8 = 7) and the last the median path, lower and upper bounds (ny × H each).
 */
import { forecastPath, predictNext } from './forecast.ts';
import { createBounds, intervalOf } from './interval.ts';
import type { Model } from './model.ts';
import { createState } from './state.ts';
import { trackBounds } from './tracking.ts';
import { update } from './update.ts';

/** What a probe gives: its outputs as bytes, and the last median path of signal 0 in its unit. */
export interface ProbeRun {
  readonly outputs: Uint8Array;
  readonly last: readonly number[];
}

/**
 * Runs the probe.
 *
 * shapes  outputs 8 · (nc · (ticks − 1) + 3 · ny · H · paths) bytes, paths = ⌊ticks / 8⌋, one more unless 8 divides ticks
 * throws  FilterError from the filter, on a model that checkModel would refuse
 * source  Marsaglia (2003), Xorshift RNGs, triple (13, 17, 5)
 */
export function runProbe(model: Model, seed: number, ticks: number): ProbeRun {
  const { channelCount: nc, signalCount: ny, horizon: H } = model;
  const state = createState(model);
  const bounds = createBounds(model);
  const readings = new Float64Array(nc);
  const predicted = new Float64Array(nc);
  const median = new Float64Array(ny * H);
  const lower = new Float64Array(ny * H);
  const upper = new Float64Array(ny * H);
  const plan = model.response === undefined ? null : new Float64Array((nc - ny) * H);
  const draw = readingGenerator(model, seed);
  const paths = Math.ceil(ticks / 8);
  const outputs = new Uint8Array(8 * (nc * Math.max(0, ticks - 1) + 3 * ny * H * paths));
  const view = new DataView(outputs.buffer);
  let at = 0;
  const put = (values: Float64Array): void => {
    for (const value of values) {
      view.setFloat64(at, value, true);
      at += 8;
    }
  };
  for (let n = 0; n < ticks; n++) {
    if (n > 0) {
      predictNext(model, state, predicted);
      put(predicted);
    }
    draw(n, readings);
    update(model, state, n, readings);
    if (plan !== null) fillPlan(model, state.value, plan);
    forecastPath(model, state, median, plan);
    trackBounds(model, bounds, state, median);
    if (n % 8 !== 7 && n !== ticks - 1) continue;
    intervalOf(model, bounds, state, median, lower, upper);
    for (const values of [median, lower, upper]) put(values);
  }
  return { outputs, last: Array.from(median.subarray(0, H)) };
}

/** A plan out of values folded in, as the file head states. */
function fillPlan(model: Model, values: Float64Array, plan: Float64Array): void {
  const { channelCount: nc, signalCount: ny, horizon: H } = model;
  for (let u = 0; u < nc - ny; u++) {
    for (let h = 1; h <= H; h++) plan[u * H + h - 1] = values[(u + h) % nc];
  }
}

/** Fills the readings of tick n, ticks in order, as the file head states. */
function readingGenerator(model: Model, seed: number): (n: number, out: Float64Array) => void {
  let x = seed | 0 || 2463534242 | 0;
  const wander = new Float64Array(model.channelCount);
  return (n, out) => {
    for (let c = 0; c < model.channelCount; c++) {
      x ^= x << 13;
      x ^= x >>> 17;
      x ^= x << 5;
      const low = x & 0xffff;
      const choice = (x >>> 16) & 7;
      wander[c] = (wander[c] * 15) / 16 + (low - 32768) / 65536;
      const isMissing = (choice === 0 && n > 2) || (c === 0 && n % 64 >= 48);
      const w = choice === 1 && n % 16 === 0 ? wander[c] + 40 : wander[c];
      const step = model.latticeStep[c];
      const offset = model.latticeOffset[c];
      const y = offset + step * Math.round((model.mean[c] + model.scale[c] * w - offset) / step);
      out[c] = isMissing ? Number.NaN : y;
    }
  };
}
