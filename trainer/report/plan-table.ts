/** What plans of the inputs are worth, and what a wrong one costs. */
import type { PlanWorth } from '../judge/plan-worth.ts';
import { escapeHtml, percent, table } from './markup.ts';

/** A row a signal: change of squared error with the true future as plan, and with a wrong one. */
export function planTable({ signals, trials }: PlanWorth): string {
  const change = (mse: number, i: number): string => {
    const rise = mse / (trials.none.mean[i] as number) - 1;
    return `${rise > 0 ? '+' : ''}${percent(rise)}`;
  };
  return table(
    ['signal', 'with what came as plan', 'with a wrong plan'],
    signals.map((name, i) => [
      `<strong>${escapeHtml(name)}</strong>`,
      change(trials.perfect.mean[i] as number, i),
      change(trials.wrong.mean[i] as number, i),
    ]),
  );
}
