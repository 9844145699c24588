/**
 * Where the model can be trusted: skill by signal and horizon against the strongest rival there, shaded.
 */
import type { Hindcast } from '../judge/hindcast.ts';
import { spanText } from '../text-table.ts';
import { escapeHtml, percent, table } from './markup.ts';

/** Steps worth a column: the first, the last, and a few between, without repeats. */
export function shownSteps(horizon: number): number[] {
  const wanted = [1, 2, 3, horizon / 8, horizon / 4, horizon / 2, (3 * horizon) / 4, horizon];
  return [...new Set(wanted.map((step) => Math.max(1, Math.min(horizon, Math.round(step)))))].sort((a, b) => a - b);
}

/** Smallest mean squared error among the rivals at one signal and step, and whose it is. */
export function strongestRival(hindcast: Hindcast, signal: number, step: number): { name: string; mse: number } {
  const { horizon, signals, rivals } = hindcast;
  let name = 'none';
  let mse = Number.POSITIVE_INFINITY;
  rivals.forEach((rival, index) => {
    const value = hindcast.rivalMse[(index * signals.length + signal) * horizon + step - 1] as number;
    if (value < mse) {
      mse = value;
      name = rival;
    }
  });
  return { name, mse };
}

/** Green where it helps, red where a rival is better, pale near zero; the number stands in the cell all the same. */
export function shade(skill: number): string {
  if (!Number.isFinite(skill)) return '';
  const strength = Math.min(1, Math.abs(skill) / 0.5).toFixed(2);
  return skill >= 0 ? `background:rgb(0 158 115 / ${strength})` : `background:rgb(213 94 0 / ${strength})`;
}

/** The table as HTML; each cell names the rival it was held against. */
export function skillTable(hindcast: Hindcast): string {
  const steps = shownSteps(hindcast.horizon);
  const rows = hindcast.signals.map((name, signal) => [
    `<strong>${escapeHtml(name)}</strong>`,
    ...steps.map((step) => {
      const rival = strongestRival(hindcast, signal, step);
      const mse = hindcast.mse[signal * hindcast.horizon + step - 1] as number;
      const skill = Number.isFinite(rival.mse) && rival.mse > 0 ? 1 - mse / rival.mse : Number.NaN;
      return `<span class="cell" style="${shade(skill)}">${percent(skill)}<small>${escapeHtml(rival.name)}</small></span>`;
    }),
  ]);
  return table(['signal', ...steps.map((step) => spanText(step * hindcast.tickMs))], rows, 'skill');
}
