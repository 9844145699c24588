/** The page that tells what became of a recording: how few numbers it comes down to, and whether they know what comes next. */

import * as Plot from '@observablehq/plot';
import { ADVISORY } from '@stillwell/protocol';
import { chart, palette } from '../report/chart.ts';
import { escapeHtml, moment, percent, plainNumber, table } from '../report/markup.ts';
import { style } from '../report/style.ts';
import { spanText } from '../text-table.ts';
import { jointColumns } from './condense-learn.ts';
import type { CondenseScore, StateSeries } from './condense-states.ts';
import { condenseVerdict } from './condense-verdict.ts';
import type { Condenser } from './condenser.ts';
import { MOST_RADIUS } from './spectral-clip.ts';

/** What the page is made of. */
export interface CondensePage {
  readonly condenser: Condenser;
  /** Digest of the condenser file, hexadecimal. */
  readonly digest: string;
  /** Recording condensed, its frames, and whether the condenser was learned from it. */
  readonly source: string;
  readonly frames: number;
  readonly isLearned: boolean;
  readonly series: StateSeries;
  readonly score: CondenseScore | null;
}

/** Points drawn of a state, at most. */
const MOST_POINTS = 1500;

/** Builds it. */
export function condensePage(page: CondensePage): string {
  const { condenser, score, source } = page;
  const { shape, record } = condenser;
  const verdict = condenseVerdict(condenser, score);
  const title = `${source.replaceAll(/[^ ,]*\//g, '')}: what its frames come down to`;
  return `<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'">
<title>${escapeHtml(title)}</title><style>${style}</style></head><body>
<h1>${escapeHtml(title)}</h1>
<p class="meta">${page.frames} frames of ${shape.frameLength} numbers · one every ${spanText(shape.tickMs)} · windows of
${spanText(shape.window * shape.tickMs)} · forecasts to ${spanText(shape.horizon * shape.tickMs)} ahead</p>
<p class="verdict${verdict.hasSkill ? '' : ' bad'}"><strong>${escapeHtml(verdict.sentence)}</strong></p>
<p class="caution"><strong>${escapeHtml(ADVISORY)}</strong> Local codes and licensed practice decide.</p>
<h2>The states</h2>
<p>Each state is one number for the scene at that moment: a weighted sum over the newest window of frames, of mean about 0 and
spread about 1 in the time learned from. ${escapeHtml(learnedWords(page))}</p>
${stateTable(condenser, score)}
${Array.from({ length: record.order }, (_, k) => `<figure>${stateChart(page, k)}</figure>`).join('\n')}
<h2>Forecasts of the frames on time never learned from</h2>
${errors(page)}
<h2>How much of the frames was kept</h2>
${spectrum(condenser)}
<h2>The record</h2>
${recordTable(page)}
</body></html>
`;
}

function learnedWords({ condenser, isLearned }: CondensePage): string {
  const until = moment(condenser.record.learnedUntilMs);
  return isLearned
    ? `Learned from frames up to ${until} (dashed line).`
    : `Learned from another recording, up to ${until}.`;
}

function stateTable({ record, explained, shape }: Condenser, score: CondenseScore | null): string {
  const { horizon: H } = shape;
  const steps = [...new Set([1, Math.max(1, Math.round(H / 4)), H])];
  const head = [
    'state',
    'of what comes, it forecasts',
    ...steps.map((h) => `better than held, ${spanText(h * shape.tickMs)} ahead`),
  ];
  const rows = Array.from({ length: record.order }, (_, k) => [
    `<strong>x${k + 1}</strong>`,
    share(explained[k]),
    ...steps.map((h) => skillCell(score, k * H + h - 1)),
  ]);
  return table(head, rows, 'glance');
}

/** Shares small and large, as people read them. */
function share(value: number): string {
  return Math.abs(value) < 0.095 ? `${plainNumber(100 * value)} %` : percent(value);
}

function skillCell(score: CondenseScore | null, at: number): string {
  if (score === null) return '–';
  const skill = 1 - score.stateOurs[at] / score.stateHeld[at];
  const mood = !Number.isFinite(skill) ? 'unknown' : skill >= 0.1 ? 'good' : skill >= 0.01 ? 'fair' : 'bad';
  return `<span class="mood ${mood}">${percent(skill)}</span>`;
}

function stateChart({ series, condenser, isLearned }: CondensePage, k: number): string {
  const { timesMs, values, order, everyMs } = series;
  const stride = Math.max(1, Math.ceil(timesMs.length / MOST_POINTS));
  const points: { time: Date; x: number }[] = [];
  for (let from = 0; from < timesMs.length; from += stride) {
    const to = Math.min(from + stride, timesMs.length);
    // A line across time without frames would show what nobody saw.
    if (from > 0 && timesMs[from] - timesMs[from - 1] > 1.5 * everyMs)
      points.push({ time: new Date(timesMs[from] - 1), x: Number.NaN });
    let sum = 0;
    for (let i = from; i < to; i++) sum += values[i * order + k];
    points.push({ time: new Date(timesMs[from]), x: sum / (to - from) });
  }
  return chart(
    {
      width: 920,
      height: 130,
      marginLeft: 55,
      x: { type: 'utc', label: k === order - 1 ? 'time (UTC)' : null, tickFormat: clockText },
      y: { label: `x${k + 1}`, grid: true, nice: true, ticks: 4 },
      marks: [
        Plot.lineY(points, { x: 'time', y: 'x', stroke: palette.ours, strokeWidth: 1.2 }),
        ...(isLearned
          ? [
              Plot.ruleX([new Date(condenser.record.learnedUntilMs)], {
                stroke: palette.nominal,
                strokeDasharray: '5 3',
              }),
            ]
          : []),
      ],
    },
    `State x${k + 1} over time`,
  );
}

function errors({ condenser, score }: CondensePage): string {
  if (score === null)
    return '<p>No stretch of held-out frames is long enough for a window and its forecast: nothing to judge.</p>';
  const { shape } = condenser;
  const kinds = [
    { name: 'newest frame held', values: score.held, colour: palette.rivals[0] },
    { name: 'mean frame', values: score.mean, colour: palette.rivals[1] },
    { name: 'from the states', values: score.ours, colour: palette.ours },
  ];
  const unit = axisUnit(shape.horizon * shape.tickMs);
  const points = kinds.flatMap(({ name, values }) =>
    Array.from(values, (value, h) => ({ name, ahead: ((h + 1) * shape.tickMs) / unit.ms, error: Math.sqrt(value) })),
  );
  const most = Math.max(...points.map(({ error }) => error));
  const picture = chart(
    {
      width: 920,
      height: 240,
      marginLeft: 55,
      x: { label: `${unit.name} ahead` },
      y: { label: 'root mean squared error (1 = spread of the frames)', grid: true, domain: [0, most || 1] },
      color: { domain: kinds.map(({ name }) => name), range: kinds.map(({ colour }) => colour) },
      marks: [
        Plot.lineY(points, { x: 'ahead', y: 'error', stroke: 'name', strokeWidth: 2 }),
        Plot.dot(shape.horizon === 1 ? points : [], { x: 'ahead', y: 'error', fill: 'name' }),
      ],
    },
    'Error of the forecast frames by distance, beside the newest frame held and the mean frame',
  );
  const legend = kinds
    .map(({ name, colour }) => `<span class="key" style="background:${colour}"></span>${name}`)
    .join(' ');
  return `<p>${legend}</p><figure>${picture}</figure>
<p>${score.origins} forecasts from ${moment(score.fromMs)} to ${moment(score.toMs)}. What no past can tell, such as the noise of each
pixel, is in all three.${shape.numbers < shape.frameLength ? ' Measured on the projected frames, whose distances are nearly those of the frames.' : ''}</p>`;
}

/** Hours and minutes of a day of 24 hours; the date where a day begins. */
function clockText(time: Date): string {
  const text = time.toISOString();
  if (text.slice(11, 19) === '00:00:00') return text.slice(0, 10);
  return text.slice(11, text.slice(17, 19) === '00' ? 16 : 19);
}

function axisUnit(ms: number): { name: string; ms: number } {
  if (ms >= 2 * 3_600_000) return { name: 'hours', ms: 3_600_000 };
  if (ms >= 120_000) return { name: 'minutes', ms: 60_000 };
  return { name: 'seconds', ms: 1000 };
}

function spectrum({ shape, singularValues, record }: Condenser): string {
  const points = Array.from(singularValues, (value, k) => ({
    number: k + 1,
    share: Math.max(1e-12, (value * value) / record.energy),
  }));
  const letGo = record.discarded / record.energy;
  const rest = Math.min(jointColumns(shape), record.rows) - singularValues.length;
  const floor = rest > 0 ? letGo / rest : 0;
  const picture = chart(
    {
      width: 920,
      height: 220,
      marginLeft: 60,
      x: { label: 'singular value number', tickFormat: 'd' },
      y: { type: 'log', label: 'share of the energy', grid: true, ticks: 4, tickFormat: '.0e' },
      marks: [
        Plot.ruleX(points, { x: 'number', y1: floorOf(points), y2: 'share', stroke: palette.band, strokeWidth: 2 }),
        Plot.dot(points, { x: 'number', y: 'share', fill: palette.ours, r: 3 }),
        ...(floor > 1e-12 ? [Plot.ruleY([floor], { stroke: palette.nominal, strokeDasharray: '5 3' })] : []),
      ],
    },
    'Shares of the energy by singular value',
  );
  return `<p>Energy of all windows of the past and what followed, by singular value. Beyond the ${record.rank} kept,
${share(letGo)} was let go; it is given back as a ridge, so that nothing is believed more than the frames support. Dashed: the mean share of
a direction that was let go. Where the points end well above it, a larger --rank keeps more.</p><figure>${picture}</figure>`;
}

function floorOf(points: readonly { share: number }[]): number {
  return Math.min(...points.map(({ share: value }) => value)) / 2;
}

function recordTable({ condenser, digest, source, series }: CondensePage): string {
  const { shape, record } = condenser;
  return table(
    ['', ''],
    [
      ['condensed', escapeHtml(source)],
      [
        'learned from',
        `${escapeHtml(record.source)}, ${moment(record.startMs)} to ${moment(record.learnedUntilMs)}, ${record.rows} windows`,
      ],
      [
        'frames',
        `${shape.frameLength} numbers, ${shape.numbers < shape.frameLength ? `projected to ${shape.numbers}` : 'taken as they are'}, seed ${shape.seed}`,
      ],
      ['window, horizon', `${shape.window} and ${shape.horizon} frames`],
      [
        'random features',
        shape.features === 0 ? 'none' : `${shape.features}, kernel width ${plainNumber(record.featureWidth)}`,
      ],
      ['states written', `${record.order}, one row every ${spanText(series.everyMs)}`],
      ['slowest memory', `spectral radius ${record.radius.toFixed(4)} as regressed, brought to at most ${MOST_RADIUS}`],
      ['condenser digest', `<code>${digest}</code>`],
    ],
  );
}
