/**
 * One row a signal for who reads nothing else: how far ahead the forecast beats any obvious guess, how far it is off on an
 * ordinary day, whether the bounds hold, and which other reading it leans on.
 */
import { strongestSimple } from '../judge/gate.ts';
import type { Hindcast } from '../judge/hindcast.ts';
import type { Reliance } from '../judge/reliance.ts';
import { skillScore } from '../judge/scores.ts';
import type { FitResult } from '../pipeline.ts';
import { spanText } from '../text-table.ts';
import { escapeHtml, percent, plainNumber, table, unitText } from './markup.ts';

/** Less skill than this is none. */
const LEAST_SKILL = 0.01;
/** Share of the nearer steps that must have skill too, for a step to count as reached. */
const NEARER_SHARE = 0.8;
/** Coverage further from the promise than this is said to be off. */
const COVERAGE_SLACK = 0.035;
/** Losing a reading that costs less than this is not leaning on it. */
const LEAST_RELIANCE = 0.03;

/** Furthest step up to which the forecast beats the strongest obvious guess; 0 where it does not. */
export function trustedSteps(hindcast: Hindcast, signal: number): number {
  const { horizon: H, signals } = hindcast;
  let good = 0;
  let reached = 0;
  for (let h = 1; h <= H; h++) {
    const rival = strongestSimple(hindcast, signal, h - 1, h);
    if (rival === -1) continue;
    const cell = signal * H + h - 1;
    const skill = skillScore(
      hindcast.mse[cell] as number,
      hindcast.rivalMse[rival * signals.length * H + cell] as number,
    );
    if (skill < LEAST_SKILL) continue;
    good++;
    if (good >= NEARER_SHARE * h) reached = h;
  }
  return reached;
}

/** The other channels whose loss costs a signal's forecast most, at most two, the dearest first. */
export function leansOn(found: Reliance, signal: number): { readonly name: string; readonly rise: number }[] {
  const nc = found.channels.length;
  return found.channels
    .map((name, c) => ({ name, c, rise: (found.ratio[signal * nc + c] as number) - 1 }))
    .filter(({ c, rise }) => c !== signal && rise >= LEAST_RELIANCE)
    .sort((a, b) => b.rise - a.rise)
    .slice(0, 2);
}

/** The table. */
export function glance({ hindcast, reliance }: FitResult): string {
  const { horizon: H, tickMs, nominalCoverage } = hindcast;
  const steps = [...new Set([1, Math.max(1, Math.round(H / 4)), H])];
  const head = [
    'signal',
    'beats any obvious guess',
    ...steps.map((h) => `off by, ${spanText(h * tickMs)} ahead`),
    `bounds (${percent(nominalCoverage)} meant)`,
    'leans on',
  ];
  const rows = hindcast.signals.map((name, signal) => [
    `<strong>${escapeHtml(name)}</strong>`,
    reachCell(hindcast, signal),
    ...steps.map((h) => offBy(hindcast, signal, h)),
    coverageCell(hindcast, signal),
    leaningCell(reliance, signal),
  ]);
  return table(head, rows, 'glance');
}

function reachCell(hindcast: Hindcast, signal: number): string {
  const { horizon: H, tickMs } = hindcast;
  if (!((hindcast.count[signal * H] as number) > 0)) return cell('unknown', 'nothing to judge by');
  const steps = trustedSteps(hindcast, signal);
  if (steps === 0) return cell('bad', 'no; use the obvious guess');
  if (steps === H) return cell('good', `all the way, ${spanText(H * tickMs)}`);
  return cell('fair', `up to ${spanText(steps * tickMs)}`);
}

function offBy(hindcast: Hindcast, signal: number, step: number): string {
  const off = hindcast.mae[signal * hindcast.horizon + step - 1] as number;
  return escapeHtml(`${plainNumber(off)} ${unitText(hindcast.units[signal] ?? '')}`.trim());
}

function coverageCell(hindcast: Hindcast, signal: number): string {
  const { horizon: H, nominalCoverage } = hindcast;
  const shares = [...hindcast.coverage.subarray(signal * H, (signal + 1) * H)].filter((share) => !Number.isNaN(share));
  if (shares.length === 0) return cell('unknown', '–');
  const mean = shares.reduce((sum, share) => sum + share, 0) / shares.length;
  const isOff = Math.abs(mean - nominalCoverage) > COVERAGE_SLACK;
  const words = isOff ? (mean < nominalCoverage ? ', too narrow' : ', too wide') : ', hold';
  return cell(isOff ? 'fair' : 'good', percent(mean) + words);
}

function leaningCell(reliance: Reliance | null, signal: number): string {
  if (reliance === null) return '–';
  const leaning = leansOn(reliance, signal);
  if (leaning.length === 0) return 'its own past alone';
  return leaning.map(({ name, rise }) => `${escapeHtml(name)} (+${percent(rise)})`).join(', ');
}

function cell(mood: 'good' | 'fair' | 'bad' | 'unknown', text: string): string {
  return `<span class="mood ${mood}">${text}</span>`;
}
