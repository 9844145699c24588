/** What a fit came to, in a few lines for a terminal. */
import { skillScore } from './judge/scores.ts';
import { blockText, crossingText } from './judge/words.ts';
import type { FitResult } from './pipeline.ts';
import { planWorthText } from './plans.ts';
import { bytesText, textTable } from './text-table.ts';

/** A table of skill by signal, and what stands around it. */
export function fitSummary(result: FitResult): string {
  const { verdicts, audit, chosen, hindcast } = result;
  const head = [
    'signal',
    ...verdicts.horizons.map((h) => `step ${h}`),
    'all steps',
    'against',
    'window ridge',
    'coverage',
  ];
  const rows = verdicts.signals.map((verdict, i) => [
    verdict.signal,
    ...verdict.skillAt.map(percent),
    percent(verdict.skill),
    verdict.bestRival,
    percent(skillOver(result, 'window ridge', i)),
    percent(verdict.coverage),
  ]);
  const right = head.flatMap((_, k) => (k > 0 && k !== verdicts.horizons.length + 2 ? [k] : []));
  // Rounded first, and 0 added, so that nothing reads -0.00.
  const rounding = `${(Math.round((audit.ratio - 1) * 1e4) / 100 + 0).toFixed(2)} %`;
  return [
    `Skill on ${hindcast.origins} origins of the judged part (squared error below the best obvious guess; 0 % is no better):`,
    textTable(head, rows, right),
    '',
    ...verdicts.signals.map((verdict) => `  ${verdict.sentence}`),
    '',
    ...[blockText(verdicts), crossingText(hindcast)].filter((text) => text !== '').map((text) => `${text}\n`),
    ...(result.planWorth === null ? [] : [planWorthText(result.planWorth)]),
    verdicts.sentence,
    `Bundle ${bytesText(result.document.length)}: ${chosen.kind} kind, ${chosen.name}; ` +
      `rounding cost ${rounding} of the squared error.`,
    guardText(result),
    ...earlierText(result),
    ...result.warnings.map((warning) => `Note: ${warning}`),
    '',
  ].join('\n');
}

/** What was learned from beside the history in memory. */
function earlierText({ earlier, hindcast: { tickMs } }: FitResult): string[] {
  if (earlier === null) return [];
  const day = (tick: number): string => new Date(tick * tickMs).toISOString().slice(0, 10);
  return [
    `Learned from ${earlier.ticks} ticks before that as well, ${day(earlier.fromTick)} to ${day(earlier.toTick)}, by their factors.`,
  ];
}

/** What the guard against wild readings did on sound ones. */
function guardText({ calibration }: FitResult): string {
  const { rejectSd, passedOver = 0, guardCost = 0 } = calibration;
  const beyond = `Readings more than ${rejectSd.toFixed(0)} robust standard deviations from their forecast are passed over`;
  if (passedOver === 0) return `${beyond}; in the calibration part there was none.`;
  return `${beyond}: ${passedOver} in the calibration part, which changed the squared error there by ${(100 * guardCost).toFixed(2)} % at most.`;
}

/** Skill of a signal over all steps against one rival; NaN where that rival could not be made. */
function skillOver({ hindcast }: FitResult, rival: string, signal: number): number {
  const r = hindcast.rivals.indexOf(rival);
  if (r === -1) return Number.NaN;
  const H = hindcast.horizon;
  let ours = 0;
  let theirs = 0;
  for (let h = 0; h < H; h++) {
    ours += hindcast.mse[signal * H + h];
    theirs += hindcast.rivalMse[r * hindcast.mse.length + signal * H + h];
  }
  return skillScore(ours, theirs);
}

/** Far below zero the figure itself says nothing more. */
function percent(share: number): string {
  if (share < -9.99) return '< -999 %';
  return Number.isFinite(share) ? `${(100 * share).toFixed(1)} %` : '-';
}
