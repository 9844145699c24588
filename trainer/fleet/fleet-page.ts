/**
 * The fleet's page: which sites failed, which need a look, then all of them in one table, each with a link to its own report.
 * One HTML file that opens anywhere, in the look of the reports.
 */
import { ADVISORY } from '@stillwell/protocol';
import { counted } from '../history/finding.ts';
import { escapeHtml, moment, percent, table } from '../report/markup.ts';
import { style } from '../report/style.ts';
import { bytesText, spanText } from '../text-table.ts';
import { fleetChart, skillSpark } from './fleet-chart.ts';
import type { FleetResult } from './run-fleet.ts';
import type { SiteFacts } from './site-facts.ts';

/** Name of the file. */
export const FLEET_PAGE = 'fleet.html';
/** Coverage further from the promise than this is marked. */
const COVERAGE_SLACK = 0.035;
/** Less skill than this is marked as little. */
const LITTLE_SKILL = 0.1;

/** Builds the page. */
export function fleetPage(results: readonly FleetResult[]): string {
  const fitted = results.flatMap(({ facts }) => (facts === null ? [] : [facts]));
  const title = `Fleet of ${counted(results.length, 'site')}`;
  return `<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'">
<title>${escapeHtml(title)}</title><style>${style}${OWN_STYLE}</style></head><body>
<h1>${escapeHtml(title)}</h1>
${summary(results, fitted)}
<p class="caution"><strong>${escapeHtml(ADVISORY)}</strong> Local codes and licensed practice decide.</p>
${failures(results)}
${fitted.length === 0 ? '' : sites(fitted)}
</body></html>
`;
}

const OWN_STYLE = `
table.fleet td { vertical-align: middle; white-space: nowrap; } table.fleet td.words { white-space: normal; }
details ul { margin: .3rem 0; padding-left: 1.2rem; white-space: normal; min-width: 22rem; } summary { cursor: pointer; }
`;

function summary(results: readonly FleetResult[], fitted: readonly SiteFacts[]): string {
  const skilled = fitted.filter(({ has_skill }) => has_skill).length;
  const failed = results.length - fitted.length;
  const without = fitted.length - skilled;
  const words = [
    `At ${skilled} of ${counted(results.length, 'site')} forecasts beat the obvious guesses`,
    ...(without > 0 ? [`at ${without} they do not, which cannot be sealed as they are`] : []),
    ...(failed > 0 ? [`${failed} could not be fitted`] : []),
  ].join('; ');
  return `<p class="verdict${failed > 0 || skilled < fitted.length ? ' bad' : ''}"><strong>${words}.</strong></p>`;
}

function failures(results: readonly FleetResult[]): string {
  const failed = results.filter(({ facts }) => facts === null);
  if (failed.length === 0) return '';
  const rows = failed.map(({ label, problem }) => [
    `<strong>${escapeHtml(label)}</strong>`,
    escapeHtml(problem as string),
  ]);
  return `<h2>What could not be fitted</h2>
<p>Mend these and run the same command again: sites that are done are not fitted again.</p>
${table(['site', 'why'], rows)}`;
}

function sites(fitted: readonly SiteFacts[]): string {
  const worstFirst = [...fitted].sort(
    (a, b) => (a.mean_skill ?? -1) - (b.mean_skill ?? -1) || (a.site < b.site ? -1 : 1),
  );
  const horizons = new Set(fitted.map(({ tick_ms, horizon }) => tick_ms * horizon));
  const reach = horizons.size === 1 ? ` (${spanText([...horizons][0] as number)})` : '';
  const head = [
    'site',
    'skill',
    `by distance, to the horizon${reach}`,
    'coverage',
    'bundle',
    'kind',
    'history',
    'notes',
  ];
  return `<h2>The fitted sites, the weakest first</h2>
<p>Skill: how much smaller the squared error is than that of the strongest obvious guess, on held-out time; a mean over the
signals. The small curve is the same from the first step to the furthest; its line stands at no skill. Coverage: readings that
fell inside the bounds.</p>
<figure>${fleetChart(fitted)}<figcaption>A site each; the dashed line is the coverage that was meant.</figcaption></figure>
${table(head, worstFirst.map(siteRow), 'fleet')}`;
}

function siteRow(facts: SiteFacts): string[] {
  const { coverage, nominal_coverage: nominal, mean_skill: skill } = facts;
  const isOff = coverage === null || Math.abs(coverage - nominal) > COVERAGE_SLACK;
  const mood = !facts.has_skill ? 'bad' : (skill ?? 0) < LITTLE_SKILL ? 'fair' : 'good';
  return [
    `<strong><a href="${escapeHtml(encodeURIComponent(facts.site))}/report.html">${escapeHtml(facts.site)}</a></strong><br><span class="meta">${escapeHtml(facts.class)}</span>`,
    `<span class="mood ${mood}">${skill === null ? '–' : percent(skill)}</span>`,
    skillSpark(facts),
    `<span class="mood ${isOff ? 'fair' : 'good'}">${coverage === null ? '–' : percent(coverage)}</span>`,
    bytesText(facts.bundle_bytes),
    escapeHtml(facts.kind),
    `${facts.ticks.toLocaleString('en')} ticks of ${spanText(facts.tick_ms)}<br><span class="meta">to ${moment(facts.to_ms)}</span>`,
    notes(facts),
  ];
}

function notes({ warnings, survey_notes: survey }: SiteFacts): string {
  const all = [...warnings, ...survey];
  if (all.length === 0) return 'none';
  const list = all.map((note) => `<li>${escapeHtml(note)}</li>`).join('');
  return `<details><summary>${counted(all.length, 'note')}</summary><ul>${list}</ul></details>`;
}
