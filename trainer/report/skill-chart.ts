/**
 * Error by horizon for one signal beside every rival, and the share of readings that fell inside the bounds.
 */
import * as Plot from '@observablehq/plot';
import type { Hindcast } from '../judge/hindcast.ts';
import { chart, palette } from './chart.ts';
import { withUnit } from './markup.ts';

/** Hours, minutes or ticks: the unit of a horizon axis that needs no reading glasses. */
export function horizonUnit(hindcast: Hindcast): { readonly label: string; readonly perTick: number } {
  const span = hindcast.horizon * hindcast.tickMs;
  if (span >= 2 * 86_400_000) return { label: 'days ahead', perTick: hindcast.tickMs / 86_400_000 };
  if (span >= 2 * 3_600_000) return { label: 'hours ahead', perTick: hindcast.tickMs / 3_600_000 };
  if (span >= 120_000) return { label: 'minutes ahead', perTick: hindcast.tickMs / 60_000 };
  return { label: 'seconds ahead', perTick: hindcast.tickMs / 1000 };
}

/** Root mean squared error by horizon: ours thick, rivals thin. */
export function errorChart(hindcast: Hindcast, signal: number): string {
  const { horizon, rivals } = hindcast;
  const { label, perTick } = horizonUnit(hindcast);
  const ours = Array.from({ length: horizon }, (_, step) => ({
    ahead: (step + 1) * perTick,
    error: Math.sqrt(hindcast.mse[signal * horizon + step] as number),
  })).filter((point) => Number.isFinite(point.error));
  const theirs = rivals.flatMap((rival, index) =>
    Array.from({ length: horizon }, (_, step) => ({
      ahead: (step + 1) * perTick,
      error: Math.sqrt(hindcast.rivalMse[(index * hindcast.signals.length + signal) * horizon + step] as number),
      rival,
    })).filter((point) => Number.isFinite(point.error)),
  );
  // Without a domain, errors of nothing but zero give an axis of nothing.
  const most = Math.max(0, ...ours.map(({ error }) => error), ...theirs.map(({ error }) => error));
  return chart(
    {
      width: 450,
      height: 230,
      marginLeft: 50,
      x: { label },
      y: {
        label: withUnit('root mean squared error', hindcast.units[signal] as string),
        grid: true,
        domain: [0, most || 1],
      },
      color: { domain: [...rivals, 'this model'], range: [...palette.rivals.slice(0, rivals.length), palette.ours] },
      marks: [
        // Rivals that coincide stay visible: the first wide and pale beneath, every later one with its own dashes.
        ...rivals.map((name, index) =>
          Plot.lineY(
            theirs.filter((point) => point.rival === name),
            {
              x: 'ahead',
              y: 'error',
              stroke: 'rival',
              strokeWidth: index === 0 ? 3.5 : 1.4,
              strokeOpacity: index === 0 ? 0.6 : 1,
              strokeDasharray: index === 0 ? 'none' : `${3 + 3 * index} 3`,
            },
          ),
        ),
        Plot.lineY(ours, { x: 'ahead', y: 'error', stroke: () => 'this model', strokeWidth: 2.6 }),
        Plot.dot(horizon === 1 ? ours : [], { x: 'ahead', y: 'error', fill: palette.ours }),
      ],
    },
    `Error of ${hindcast.signals[signal]} by horizon beside ${rivals.join(', ')}`,
  );
}

/** Share of readings inside the bounds by horizon, beside the promised share. */
export function coverageChart(hindcast: Hindcast, signal: number): string {
  const { horizon } = hindcast;
  const { label, perTick } = horizonUnit(hindcast);
  const shares = Array.from({ length: horizon }, (_, step) => ({
    ahead: (step + 1) * perTick,
    share: 100 * (hindcast.coverage[signal * horizon + step] as number),
  })).filter((point) => Number.isFinite(point.share));
  return chart(
    {
      width: 450,
      height: 230,
      marginLeft: 50,
      x: { label },
      y: { label: 'readings inside the bounds (%)', domain: [50, 100], grid: true, clamp: true },
      marks: [
        Plot.ruleY([100 * hindcast.nominalCoverage], { stroke: palette.nominal, strokeDasharray: '5 3' }),
        Plot.lineY(shares, { x: 'ahead', y: 'share', stroke: palette.ours, strokeWidth: 2 }),
      ],
    },
    `Coverage of ${hindcast.signals[signal]} by horizon`,
  );
}
