/**
 * Forecasts laid end to end over held-out days, with their bounds, beside the readings that came.
 */
import * as Plot from '@observablehq/plot';
import type { Hindcast, HindcastPath } from '../judge/hindcast.ts';
import { chart, palette } from './chart.ts';
import { withUnit } from './markup.ts';

interface Step {
  readonly time: Date;
  readonly median: number;
  readonly lower: number;
  readonly upper: number;
  readonly origin: number;
}

/** Paths that follow on without overlap from `fromMs`: each starts where the one before has ended. */
export function endToEnd(hindcast: Hindcast, fromMs: number, toMs: number): HindcastPath[] {
  const span = hindcast.horizon * hindcast.tickMs;
  const chosen: HindcastPath[] = [];
  let free = Number.NEGATIVE_INFINITY;
  for (const path of hindcast.paths) {
    if (path.originMs < fromMs || path.originMs + span > toMs || path.originMs < free) continue;
    chosen.push(path);
    free = path.originMs + span;
  }
  return chosen;
}

/** Hours and minutes of a day of 24 hours; the date where a day begins. */
function clockText(time: Date): string {
  const text = time.toISOString();
  return text.slice(11, 16) === '00:00' ? text.slice(0, 10) : text.slice(11, 16);
}

/** Draws one signal over [fromMs, toMs]. */
export function forecastChart(hindcast: Hindcast, signal: number, fromMs: number, toMs: number): string {
  const { horizon, tickMs } = hindcast;
  const readings = hindcast.readings[signal] as Float64Array;
  const told: Step[] = endToEnd(hindcast, fromMs, toMs).flatMap((path) =>
    Array.from({ length: horizon }, (_, step) => ({
      time: new Date(path.originMs + (step + 1) * tickMs),
      median: path.median[signal * horizon + step] as number,
      lower: path.lower[signal * horizon + step] as number,
      upper: path.upper[signal * horizon + step] as number,
      origin: path.originMs,
    })),
  );
  const first = Math.max(0, Math.ceil((fromMs - hindcast.fromMs) / tickMs));
  const last = Math.min(readings.length - 1, Math.floor((toMs - hindcast.fromMs) / tickMs));
  const came = Array.from({ length: Math.max(0, last - first + 1) }, (_, k) => ({
    time: new Date(hindcast.fromMs + (first + k) * tickMs),
    value: readings[first + k] as number,
  }));
  return chart(
    {
      width: 920,
      height: 230,
      marginLeft: 55,
      x: { type: 'utc', label: 'time (UTC)', tickFormat: clockText },
      y: {
        label: withUnit(hindcast.signals[signal] as string, hindcast.units[signal] as string),
        grid: true,
        nice: true,
      },
      marks: [
        Plot.areaY(told, { x: 'time', y1: 'lower', y2: 'upper', z: 'origin', fill: palette.band, fillOpacity: 0.35 }),
        Plot.lineY(came, { x: 'time', y: 'value', stroke: palette.reading, strokeWidth: 1, strokeOpacity: 0.8 }),
        Plot.lineY(told, { x: 'time', y: 'median', z: 'origin', stroke: palette.ours, strokeWidth: 1.6 }),
      ],
    },
    `Forecast and readings of ${hindcast.signals[signal]}`,
  );
}
