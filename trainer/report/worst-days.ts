/** The days on which forecasts missed most, the worst first: where an engineer looks first. */
import type { Hindcast } from '../judge/hindcast.ts';
import { spellName, worstSpells } from '../judge/worst-days.ts';
import { spanText } from '../text-table.ts';
import { escapeHtml, plainNumber, table } from './markup.ts';

/** Stretches listed. */
const LISTED = 6;
/** A signal is named on a stretch where it missed this many times more than usually. */
const NAMED_FROM = 1.5;
/** Stretches of a signal looked through for those listed. */
const LOOKED_THROUGH = 10_000;

/** A row a stretch: when, how bad, and which signals. */
export function worstDays(hindcast: Hindcast): string {
  const { overall, bySignal, spellMs } = worstSpells(hindcast, LOOKED_THROUGH);
  if (overall.length === 0) return '<p>Held-out time holds no whole forecast.</p>';
  const rows = overall.slice(0, LISTED).map(({ fromMs, timesUsual }) => {
    const named = bySignal
      .flatMap((spells, i) => spells.filter((spell) => spell.fromMs === fromMs).map((spell) => ({ spell, i })))
      .filter(({ spell }) => spell.timesUsual >= NAMED_FROM)
      .sort((a, b) => b.spell.timesUsual - a.spell.timesUsual)
      .map(({ spell, i }) => `${escapeHtml(hindcast.signals[i] as string)} (${plainNumber(spell.timesUsual)} times)`);
    return [
      `<strong>${spellName(fromMs, spellMs)}</strong>`,
      `${plainNumber(timesUsual)} times the usual squared error`,
      named.length > 0 ? named.join(', ') : 'none by itself',
    ];
  });
  const length = spellMs >= 86_400_000 ? 'day' : `stretch of ${spanText(spellMs)}`;
  return table([`${length} (UTC)`, 'all signals together', 'signals that stood out'], rows);
}
