/** What came of a fleet, in a table for a terminal, and a sentence for each site that failed. */
import { counted } from '../history/finding.ts';
import { bytesText, textTable } from '../text-table.ts';
import type { FleetResult } from './run-fleet.ts';

/** The table. */
export function fleetText(results: readonly FleetResult[]): string {
  const rows = results.map((one) => {
    const { label, facts } = one;
    if (facts === null) return [label, 'failed', '-', '-', '-', '-', '-'];
    return [
      label,
      `${facts.has_skill ? 'ready' : 'no skill'}${one.isUnchanged ? ', as before' : ''}`,
      percent(facts.mean_skill),
      percent(facts.coverage),
      bytesText(facts.bundle_bytes),
      facts.kind,
      String(facts.warnings.length + facts.survey_notes.length),
    ];
  });
  const failed = results.filter(({ facts }) => facts === null);
  const head = ['site', 'came to', 'skill', 'coverage', 'bundle', 'kind', 'notes'];
  return [
    textTable(head, rows, [2, 3, 4, 6]),
    '',
    ...failed.map(({ label, problem }) => `Failed: ${label}: ${problem}`),
    ...(failed.length > 0 ? [''] : []),
    countText(results),
  ].join('\n');
}

function countText(results: readonly FleetResult[]): string {
  const fitted = results.filter(({ facts }) => facts !== null);
  const asBefore = results.filter((one) => one.facts !== null && one.isUnchanged).length;
  const skilled = fitted.filter(({ facts }) => facts?.has_skill).length;
  const failed = results.length - fitted.length;
  return [
    `${counted(results.length, 'site')}: ${skilled} with skill, ${fitted.length - skilled} without`,
    ...(asBefore > 0 ? [`${asBefore} unchanged and not fitted again`] : []),
    failed > 0 ? `${failed} failed; mend them and run the same command again` : 'none failed',
  ].join(', ');
}

function percent(share: number | null): string {
  return share === null ? '-' : `${(100 * share).toFixed(1)} %`;
}
