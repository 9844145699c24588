/**
 * The fit report: one HTML file with everything inside, for a plant engineer who was never taught statistics. Most
 * important first: may it be trusted, how far ahead, what the forecasts look like, then the evidence, then the record.
 */
import { ADVISORY, type Site } from '@stillwell/protocol';
import type { Survey } from '../history/survey.ts';
import type { Hindcast } from '../judge/hindcast.ts';
import type { FitResult } from '../pipeline.ts';
import { spanText } from '../text-table.ts';
import { blockTable } from './block-table.ts';
import { palette } from './chart.ts';
import { forecastChart } from './forecast-chart.ts';
import { glance } from './glance.ts';
import { escapeHtml, moment, percent, plainNumber, table, unitText } from './markup.ts';
import { planTable } from './plan-table.ts';
import { isLearnedAgain, record } from './record.ts';
import { reliabilityChart, reliabilityWords } from './reliability-chart.ts';
import { relianceTable } from './reliance-table.ts';
import { autocorrelationChart, histogramChart } from './residual-chart.ts';
import { coverageChart, errorChart } from './skill-chart.ts';
import { skillTable } from './skill-table.ts';
import { style } from './style.ts';
import { worstDays } from './worst-days.ts';

/** What the report is made of. */
export interface ReportInput {
  readonly site: Site;
  readonly survey: Survey;
  readonly result: FitResult;
}

/** Days of held-out time shown in the forecast plots, at most. */
const SHOWN_HORIZONS = 8;

/**
 * Builds the page.
 *
 * throws  nothing of its own; the charts of a signal without a single held-out reading are replaced by a sentence
 */
export function fitReport({ site, survey, result }: ReportInput): string {
  const title = `${site.site}: what the model knows`;
  return `<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'">
<title>${escapeHtml(title)}</title><style>${style}</style></head><body>
<h1>${escapeHtml(title)}</h1>
${summary(site, result)}
<p class="caution"><strong>${escapeHtml(ADVISORY)}</strong> Local codes and licensed practice decide.</p>
<h2>At a glance</h2>
${glance(result)}
<h2>What was found wrong in the history</h2>
${findings(survey, result)}
<h2>How far ahead it can be trusted</h2>
<p>How much smaller the squared error is than that of the strongest rival (named in the cell) at that distance,
on held-out time that the model never saw: 0 % is no better, 100 % would be perfect, below 0 % the rival is better.</p>
${skillTable(result.hindcast)}
${isLearnedAgain(result) ? '<p>After that it learned once more from the whole history, which is the model in the bundle.</p>' : ''}
${verdictList(result)}
${stretches(result)}
${resting(result)}
${plans(result)}
<h2>The worst of it first</h2>
<p>When forecasts begun in that time missed most. Look there before trusting the rest.</p>
${worstDays(result.hindcast)}
<h2>Forecasts over held-out days</h2>
<p>${key(palette.reading)}reading that came ${key(palette.ours)}forecast, issued at the left end of each piece
${key(palette.band)}bounds meant to hold ${percent(result.hindcast.nominalCoverage)} of the readings</p>
${perSignal(result.hindcast, (signal) => forecastPlots(result.hindcast, signal))}
<h2>Error by distance, and how well the bounds held</h2>
<p>${legend(result.hindcast)}</p>
${perSignal(result.hindcast, (signal) => pair(errorChart(result.hindcast, signal), coverageChart(result.hindcast, signal)))}
${crossings(result)}
<h2>What the next-tick forecast missed</h2>
<p>Left: size of the misses beside the normal curve of the same spread (dashed). Right: bars outside the dashed band say
that a miss still tells something about later ones, so there is more to learn.</p>
${perSignal(result.hindcast, (signal) => pair(histogramChart(result.hindcast, signal), autocorrelationChart(result.hindcast, signal)))}
<h2>The record</h2>
${record(result)}
</body></html>
`;
}

function resting({ reliance, hindcast }: FitResult): string {
  if (reliance === null) return '';
  return `<h2>Which readings the forecasts rest on</h2>
<p>How much the squared error rises when a reading stays away, as when its sensor fails: the dearest sensor is the one to
look after first. Measured on ${reliance.origins} forecasts of held-out time.</p>
${relianceTable(reliance, hindcast.signals)}`;
}

function summary(site: Site, { hindcast, verdicts, document, earlier }: FitResult): string {
  const before =
    earlier === null
      ? ''
      : ` · learned from ${earlier.ticks} ticks before that, since ${moment(earlier.fromTick * site.tickMs)}`;
  const span = `${moment(hindcast.fromMs)} to ${moment(hindcast.toMs)}`;
  return `<p class="meta">${escapeHtml(site.equipmentClass)} · tick ${spanText(site.tickMs)} · forecasts to
${spanText(site.tickMs * hindcast.horizon)} ahead · bundle ${plainNumber(document.length / 1024)} KiB · judged on ${span}${before}</p>
<p class="verdict${verdicts.hasSkill ? '' : ' bad'}"><strong>${escapeHtml(verdicts.sentence)}</strong></p>`;
}

function verdictList({ verdicts }: FitResult): string {
  return `<ul>${verdicts.signals.map(({ sentence }) => `<li>${escapeHtml(sentence)}</li>`).join('\n')}</ul>`;
}

function stretches({ verdicts }: FitResult): string {
  const blocks = blockTable(verdicts);
  if (blocks === '') return '';
  return `<h3>Was it there all along?</h3>
<p>The same over all steps, against the strongest obvious guess, by stretches of the held-out time. The last column says
whether so much could be luck (test of Diebold and Mariano).</p>
${blocks}`;
}

function plans({ planWorth }: FitResult): string {
  if (planWorth === null) return '';
  return `<h2>What a plan of the inputs is worth</h2>
<p>Change of the squared error when forecasts are told what ${planWorth.inputs.map(escapeHtml).join(', ')} will do, beside
not being told; and when what they are told is wrong. Measured on ${planWorth.origins} forecasts of held-out time.</p>
${planTable(planWorth)}`;
}

function crossings({ hindcast }: FitResult): string {
  const { reliability, tickMs } = hindcast;
  if (reliability === null || reliability.count === 0) return '';
  return `<h2>Were limits crossed as often as was said?</h2>
<p>${escapeHtml(reliabilityWords(reliability, tickMs))} On the dashed line the chances are right; grey bars show how often such
a chance was said.</p>
<figure>${reliabilityChart(reliability)}</figure>`;
}

/** One block a signal, or one plain sentence where nothing was there to judge. */
function perSignal(hindcast: Hindcast, draw: (signal: number) => string): string {
  return hindcast.signals
    .map((name, signal) => {
      const judged = (hindcast.count[signal * hindcast.horizon] as number) > 0;
      const body = judged ? draw(signal) : '<p>No held-out reading of this signal: nothing to judge.</p>';
      return `<h3>${escapeHtml(name)} <span class="meta">${escapeHtml(unitText(hindcast.units[signal] ?? ''))}</span></h3>${body}`;
    })
    .join('\n');
}

/** The days whose forecasts missed most, then the most ordinary ones. */
function forecastPlots(hindcast: Hindcast, signal: number): string {
  const span = hindcast.horizon * hindcast.tickMs;
  const width = Math.min(SHOWN_HORIZONS * span, hindcast.toMs - hindcast.fromMs);
  const windows = missByWindow(hindcast, signal, width);
  const worst = windows.at(-1);
  const ordinary = windows[Math.floor((windows.length - 1) / 2)];
  if (worst === undefined || ordinary === undefined) return '<p>Held-out time is too short to draw.</p>';
  const draw = (fromMs: number, words: string): string =>
    `<figure>${forecastChart(hindcast, signal, fromMs, fromMs + width)}<figcaption>${words}: from ${moment(fromMs)}</figcaption></figure>`;
  return worst === ordinary
    ? draw(worst, 'Held-out time')
    : draw(worst, 'Worst stretch') + draw(ordinary, 'Ordinary stretch');
}

/** Starts of windows of held-out time, from the smallest to the largest mean absolute miss of the drawn paths. */
function missByWindow(hindcast: Hindcast, signal: number, width: number): number[] {
  const { horizon, tickMs } = hindcast;
  const readings = hindcast.readings[signal] as Float64Array;
  const scored: { start: number; miss: number }[] = [];
  for (let start = hindcast.fromMs - tickMs; start + width <= hindcast.toMs + tickMs; start += width) {
    let sum = 0;
    let count = 0;
    for (const path of hindcast.paths) {
      if (path.originMs < start || path.originMs + horizon * tickMs > start + width) continue;
      const first = Math.round((path.originMs - hindcast.fromMs) / tickMs);
      for (let step = 1; step <= horizon; step += 1) {
        const miss = Math.abs(
          (readings[first + step] as number) - (path.median[signal * horizon + step - 1] as number),
        );
        if (!Number.isFinite(miss)) continue;
        sum += miss;
        count += 1;
      }
    }
    if (count > 0) scored.push({ start, miss: sum / count });
  }
  return scored.sort((a, b) => a.miss - b.miss || a.start - b.start).map(({ start }) => start);
}

function pair(left: string, right: string): string {
  return `<div class="pair"><figure>${left}</figure><figure>${right}</figure></div>`;
}

function key(colour: string): string {
  return `<span class="key" style="background:${colour}"></span>`;
}

function legend({ rivals }: Hindcast): string {
  return [
    key(palette.ours) + 'this model',
    ...rivals.map((rival, index) => key(palette.rivals[index] ?? '#999') + escapeHtml(rival)),
  ].join(' ');
}

function findings(survey: Survey, { warnings }: FitResult): string {
  const rows = survey.findings.map((finding) => [escapeHtml(finding.kind), escapeHtml(finding.sentence)]);
  const listed = rows.length > 0 ? table(['what', 'where and how much'], rows) : '<p>Nothing out of the ordinary.</p>';
  if (warnings.length === 0) return listed;
  const warned = warnings.map((warning) => `<li>${escapeHtml(warning)}</li>`).join('\n');
  return `${listed}\n<div class="caution">What this did to the fit:<ul>${warned}</ul></div>`;
}
