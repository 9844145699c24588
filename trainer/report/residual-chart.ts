/**
 * What the one-step forecast missed: how large (histogram beside the normal curve of the same spread) and whether the
 * misses still remember each other (autocorrelation beside the band that white noise keeps to 95 times in 100).
 */
import * as Plot from '@observablehq/plot';
import type { Hindcast } from '../judge/hindcast.ts';
import { chart, palette } from './chart.ts';
import { withUnit } from './markup.ts';

/** Mean and standard deviation of the finite entries; count says how many. */
export function spread(values: Float64Array): { readonly mean: number; readonly sd: number; readonly count: number } {
  let count = 0;
  let sum = 0;
  for (let index = 0; index < values.length; index += 1) {
    const value = values[index] as number;
    if (!Number.isFinite(value)) continue;
    count += 1;
    sum += value;
  }
  const mean = count > 0 ? sum / count : Number.NaN;
  let squares = 0;
  for (let index = 0; index < values.length; index += 1) {
    const value = values[index] as number;
    if (Number.isFinite(value)) squares += (value - mean) ** 2;
  }
  return { mean, sd: count > 1 ? Math.sqrt(squares / (count - 1)) : Number.NaN, count };
}

/**
 * Sample autocorrelation at lags 1..maxLag over the pairs that are both present.
 *
 * shapes  values (n), NaN marks a gap; result (maxLag)
 * source  Box, Jenkins, Reinsel and Ljung, Time Series Analysis, section 2.1; pairs with a gap are left out
 */
export function autocorrelation(values: Float64Array, maxLag: number): Float64Array {
  const { mean, sd } = spread(values);
  const out = new Float64Array(maxLag);
  const away = new Float64Array(values.length);
  for (let index = 0; index < away.length; index += 1) away[index] = (values[index] as number) - mean;
  for (let lag = 1; lag <= maxLag; lag += 1) {
    let sum = 0;
    let pairs = 0;
    for (let index = lag; index < away.length; index += 1) {
      const product = (away[index] as number) * (away[index - lag] as number);
      // 0 for a finite product alone.
      if (product - product !== 0) continue;
      sum += product;
      pairs += 1;
    }
    out[lag - 1] = pairs > 0 && sd > 0 ? sum / pairs / (sd * sd) : Number.NaN;
  }
  return out;
}

/** Histogram of the one-step residual with the normal curve of the same mean and spread. */
export function histogramChart(hindcast: Hindcast, signal: number): string {
  const residuals = hindcast.residuals[signal] as Float64Array;
  const { mean, sd, count } = spread(residuals);
  const reach = Number.isFinite(sd) && sd > 0 ? 4.5 * sd : 1;
  const bins = 45;
  const width = (2 * reach) / bins;
  const bars = Array.from({ length: bins }, (_, index) => ({
    from: mean - reach + index * width,
    to: mean - reach + (index + 1) * width,
    ticks: 0,
  }));
  for (const value of residuals) {
    const bar = bars[Math.floor((value - mean + reach) / width)];
    if (bar) bar.ticks += 1;
  }
  const curve = Array.from({ length: 181 }, (_, index) => {
    const value = mean - reach + (index / 180) * 2 * reach;
    const normal = Math.exp(-0.5 * ((value - mean) / sd) ** 2) / (sd * Math.sqrt(2 * Math.PI));
    return { value, expected: normal * count * width };
  }).filter((point) => Number.isFinite(point.expected));
  return chart(
    {
      width: 450,
      height: 210,
      marginLeft: 50,
      x: { label: withUnit('one-step residual', hindcast.units[signal] as string) },
      y: { label: 'ticks', grid: true },
      marks: [
        Plot.rectY(bars, { x1: 'from', x2: 'to', y: 'ticks', fill: palette.band, inset: 0.3 }),
        Plot.lineY(curve, { x: 'value', y: 'expected', stroke: palette.nominal, strokeDasharray: '4 2' }),
        Plot.ruleY([0]),
      ],
    },
    `Residuals of ${hindcast.signals[signal]}`,
  );
}

/** Autocorrelation of the one-step residual with the 95 % band of white noise, ±1.96/√n (Bartlett 1946). */
export function autocorrelationChart(hindcast: Hindcast, signal: number): string {
  const residuals = hindcast.residuals[signal] as Float64Array;
  const { count } = spread(residuals);
  const maxLag = Math.max(1, Math.min(48, Math.floor(count / 4)));
  const bars = Array.from(autocorrelation(residuals, maxLag), (value, index) => ({ lag: index + 1, value })).filter(
    (bar) => Number.isFinite(bar.value),
  );
  const band = count > 0 ? 1.96 / Math.sqrt(count) : 0;
  const reach = Math.max(0.25, ...bars.map((bar) => Math.abs(bar.value)));
  return chart(
    {
      width: 450,
      height: 210,
      marginLeft: 50,
      x: { label: 'lag (ticks)' },
      y: { label: 'autocorrelation of the residual', domain: [-reach, reach], grid: true },
      marks: [
        Plot.ruleY([-band, band], { stroke: palette.nominal, strokeDasharray: '4 2' }),
        Plot.ruleX(bars, { x: 'lag', y: 'value', stroke: palette.ours, strokeWidth: 4 }),
        Plot.ruleY([0]),
      ],
    },
    `Autocorrelation of the residuals of ${hindcast.signals[signal]}`,
  );
}
