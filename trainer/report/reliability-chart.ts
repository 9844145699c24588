/** Whether limits were crossed as often as was said, and how far off the said time was. */
import * as Plot from '@observablehq/plot';
import type { Reliability } from '../judge/reliability.ts';
import { spanText } from '../text-table.ts';
import { chart, palette } from './chart.ts';
import { percent, plainNumber } from './markup.ts';

/** The diagram: said against observed; a bar at the foot of each point shows how often such a thing was said. */
export function reliabilityChart({ bins, count }: Reliability): string {
  const points = bins.map(({ said, observed, count: asked }) => ({
    said: 100 * said,
    observed: 100 * observed,
    asked: (100 * asked) / count,
  }));
  return chart(
    {
      width: 450,
      height: 300,
      marginLeft: 50,
      x: { label: 'probability of crossing that was said (%)', domain: [0, 100] },
      y: { label: 'crossings that came (%)', domain: [0, 100], grid: true },
      marks: [
        Plot.ruleX(points, { x: 'said', y1: 0, y2: 'asked', stroke: '#bbb', strokeWidth: 9 }),
        Plot.lineY(
          [
            { said: 0, observed: 0 },
            { said: 100, observed: 100 },
          ],
          { x: 'said', y: 'observed', stroke: palette.nominal, strokeDasharray: '5 3' },
        ),
        Plot.lineY(points, { x: 'said', y: 'observed', stroke: palette.ours, strokeWidth: 2 }),
        Plot.dot(points, { x: 'said', y: 'observed', fill: palette.ours, r: 4 }),
      ],
    },
    'Said probability of crossing a limit beside the share that came',
  );
}

/** What the diagram says, in words. */
export function reliabilityWords(found: Reliability, tickMs: number): string {
  const limits = found.isDeclared
    ? `the ${found.limits} limits of the site file`
    : `${found.limits} limits put at usual highs and lows, since the site file declares none`;
  const better = found.brierOfShare > 0 ? 1 - found.brier / found.brierOfShare : 0;
  const timed =
    found.timed > 0
      ? ` Where a time was said and the crossing came, the time was off by ${spanText(found.stepError * tickMs)} on average.`
      : '';
  return (
    `Asked ${found.count} times about ${limits}; ${percent(found.crossed)} were crossed within the horizon. Said and observed ` +
    `shares differ by ${plainNumber(100 * found.meanGap)} points on average; squared error ${percent(better)} below saying ` +
    `${percent(found.crossed)} every time (Brier score).${timed}`
  );
}
