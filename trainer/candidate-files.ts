/** What fit and refit leave in a folder, and what they say of it to a program. */
import { basename, join } from 'node:path';
import { ADVISORY, type Site } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import type { Survey } from './history/survey.ts';
import { hindcastJson } from './judge/hindcast-json.ts';
import { planWorthJson } from './judge/plan-worth.ts';
import type { FitResult } from './pipeline.ts';

/** Names of the files, for help texts. */
export const CANDIDATE_FILES = 'candidate.swc, report.html, hindcast.json, survey.json and factors.swf';

/** Candidate, report, hindcast and survey as files of a folder, made and not yet written. */
export async function candidateFiles(
  folder: string,
  site: Site,
  survey: Survey,
  result: FitResult,
): Promise<readonly NewFile[]> {
  // Plots take half a second to load, which commands without a report need not wait for.
  const { fitReport } = await import('./report/page.ts');
  const hindcast = `${JSON.stringify({ ...hindcastJson(result.hindcast), ...planWorthJson(result.planWorth) }, null, 2)}\n`;
  const report = fitReport({ site, survey, result });
  return [
    { path: join(folder, 'survey.json'), bytes: `${JSON.stringify(survey, null, 2)}\n` },
    { path: join(folder, 'hindcast.json'), bytes: hindcast },
    { path: join(folder, 'report.html'), bytes: report },
    { path: join(folder, 'candidate.swc'), bytes: result.document },
  ];
}

/** The last word on what stands where. */
export function writtenText(folder: string, files: readonly NewFile[]): string {
  return `Written to ${folder}: ${files.map(({ path }) => basename(path)).join(', ')}\n`;
}

/** The result as plain JSON. */
export function candidateFacts(folder: string, result: FitResult): Record<string, unknown> {
  return {
    candidate: join(folder, 'candidate.swc'),
    bytes: result.document.length,
    has_skill: result.verdicts.hasSkill,
    mean_skill: result.verdicts.meanSkill,
    verdict: result.verdicts.sentence,
    signals: result.verdicts.signals,
    audit: result.audit,
    ...planWorthJson(result.planWorth),
    chosen: result.chosen,
    learned_earlier: earlierFacts(result),
    warnings: result.warnings,
    timings_ms: result.timings,
    advisory: ADVISORY,
  };
}

function earlierFacts({ earlier, hindcast }: FitResult): Record<string, unknown> | null {
  const time = (tick: number): string => new Date(tick * hindcast.tickMs).toISOString();
  return earlier && { from: time(earlier.fromTick), to: time(earlier.toTick), ticks: earlier.ticks };
}
