/** Skill by stretches of held-out time: whether it was there all along, or luck of one week. */
import type { Verdict, Verdicts } from '../judge/gate.ts';
import { escapeHtml, moment, percent, plainNumber, table } from './markup.ts';
import { shade } from './skill-table.ts';

/** Less than this by chance alone is sure. */
const SURE = 0.05;

/** The table, and what the test says beside it. */
export function blockTable({ signals }: Verdicts): string {
  const blocks = signals[0]?.blocks ?? [];
  if (blocks.length < 2) return '';
  const head = ['signal', 'against', ...blocks.map(({ fromMs }) => `from ${moment(fromMs).slice(0, 10)}`), 'sure?'];
  const rows = signals.map((verdict) => [
    `<strong>${escapeHtml(verdict.signal)}</strong>`,
    escapeHtml(verdict.bestRival),
    ...verdict.blocks.map(({ skill }) => `<span class="cell" style="${shade(skill)}">${percent(skill)}</span>`),
    sureness(verdict),
  ]);
  return table(head, rows, 'skill');
}

/** The test's p-value in words. */
function sureness({ test }: Verdict): string {
  if (test === null) return 'too little to tell';
  const isBetter = test.pBetter <= test.pWorse;
  const p = Math.min(test.pBetter, test.pWorse);
  const words = p >= SURE ? 'may be chance' : isBetter ? 'surely better' : 'surely worse';
  return `${words} (p ${p < 0.001 ? '&lt; 0.001' : plainNumber(Number(p.toPrecision(2)))})`;
}
