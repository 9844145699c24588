/** What losing each reading would cost each forecast, shaded. */
import type { Reliance } from '../judge/reliance.ts';
import { escapeHtml, percent, table } from './markup.ts';

/** Rise at which a cell is darkest. */
const DARKEST = 1;

/** The table as HTML: a row a forecast, a column a lost reading. */
export function relianceTable(reliance: Reliance, signals: readonly string[]): string {
  const nc = reliance.channels.length;
  const rows = signals.map((name, i) => [
    `<strong>${escapeHtml(name)}</strong>`,
    ...reliance.channels.map((_, c) => {
      const rise = (reliance.ratio[i * nc + c] as number) - 1;
      return `<span class="cell" style="${shade(rise)}">${riseText(rise)}</span>`;
    }),
  ]);
  return table(['forecast of', ...reliance.channels.map((name) => `without ${escapeHtml(name)}`)], rows, 'skill');
}

/** Beyond ten times the figure itself says nothing more. */
function riseText(rise: number): string {
  if (rise > 9.99) return '&gt; +999 %';
  return rise >= 0.005 ? `+${percent(rise)}` : percent(rise);
}

function shade(rise: number): string {
  if (!(rise >= 0.005)) return '';
  return `background:rgb(204 121 167 / ${Math.min(1, rise / DARKEST).toFixed(2)})`;
}
