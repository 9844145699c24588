/**
 * Lines about a hindcast for a terminal: when it was worst, how skill went from stretch to stretch, how far crossing
 * probabilities can be believed.
 */
import { shortNumber, spanText, textTable } from '../text-table.ts';
import type { Verdicts } from './gate.ts';
import type { Hindcast } from './hindcast.ts';
import { spellName, worstSpells } from './worst-days.ts';

const WORST = 3;

/** The worst stretches of time, of all signals together and of each. */
export function worstText(hindcast: Hindcast): string {
  const { spellMs, overall, bySignal } = worstSpells(hindcast, WORST);
  const rows = [overall, ...bySignal].map((spells, k) => [
    k === 0 ? 'all signals' : (hindcast.signals[k - 1] as string),
    ...Array.from({ length: WORST }, (_, n) => {
      const spell = spells[n];
      return spell === undefined ? '' : `${spellName(spell.fromMs, spellMs)} (${shortNumber(spell.timesUsual, 2)} x)`;
    }),
  ]);
  const head = ['worst first', ...Array.from({ length: WORST }, (_, n) => `${n + 1}`)];
  return `Forecasts begun on these days or times were worst (squared error over the usual):\n${textTable(head, rows, [])}`;
}

/** Skill by stretch of the judged time; '' where it is one stretch. */
export function blockText(verdicts: Verdicts): string {
  const [first] = verdicts.signals.filter((verdict) => verdict.blocks.length > 0);
  if (first === undefined || first.blocks.length < 2) return '';
  const stretchMs = first.blocks[0]!.toMs - first.blocks[0]!.fromMs;
  const head = ['skill from', ...first.blocks.map((block) => spellName(block.fromMs, stretchMs)), 'p'];
  const rows = verdicts.signals
    .filter((verdict) => verdict.blocks.length > 0)
    .map(({ signal, blocks, test }) => [
      signal,
      ...blocks.map((block) => percent(block.skill)),
      test === null ? '-' : chance(test.pBetter),
    ]);
  const right = head.map((_, k) => k).slice(1);
  return (
    `Skill over the best obvious guess, by stretch of the judged time; p: chance of so much by luck (Diebold-Mariano):\n` +
    textTable(head, rows, right)
  );
}

/** Whether crossing probabilities came true as often as said; '' where no limit could be asked about. */
export function crossingText({ reliability, tickMs }: Hindcast): string {
  if (reliability === null) return '';
  const { isDeclared, limits, count, crossed, brier, brierOfShare, meanGap, timed, stepError } = reliability;
  const which = isDeclared ? `${limits} declared limits` : `${limits} limits put at quantiles, since none is declared`;
  const when =
    timed === 0
      ? ''
      : ` Time of crossing, where one was said and came: off by ${spanText(stepError * tickMs)} on average.`;
  return (
    `Crossings, asked ${count} times of ${which}: ${percent(crossed)} came; said and observed shares differ by ` +
    `${percent(meanGap)} on average, Brier score ${brier.toFixed(4)} (${brierOfShare.toFixed(4)} for always saying ${percent(crossed)}).${when}`
  );
}

/** Below a thousandth the figure says nothing more. */
function chance(p: number): string {
  return p < 0.001 ? '< 0.001' : p.toFixed(3);
}

function percent(share: number): string {
  return Number.isFinite(share) ? `${(100 * share).toFixed(1)} %` : '-';
}
