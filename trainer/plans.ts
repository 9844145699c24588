/**
 * Plans of inputs in a fit: which inputs have them, what they bring, and what they are worth on held-out time.
 */
import type { Site } from '@stillwell/protocol';
import { settlingTicksOf } from '@stillwell/runtime/filter';
import type { Prepared } from './identify/prepare.ts';
import { learnResponse, type Response } from './identify/response.ts';
import type { PlanWorth } from './judge/plan-worth.ts';
import type { Candidate } from './kinds/candidate.ts';
import { textTable } from './text-table.ts';

/** What plans bring to a candidate; `response` null: nothing, or the kind takes plans itself. */
export interface Plans {
  /** Inputs with a plan topic, counted from the first input. */
  readonly planned: readonly number[];
  readonly response: Response | null;
  readonly warnings: readonly string[];
}

/** Inputs whose plans a site may get, counted from the first input. */
export function plannedInputs(site: Site): number[] {
  return site.inputs.flatMap((one, u) => (one.planTopic === null ? [] : [u]));
}

/** Learns what plans bring from the first `ticks` ticks. */
export function learnPlans(candidate: Candidate, { calm }: Prepared, ticks: number, planned: readonly number[]): Plans {
  if (planned.length === 0 || candidate.kind === 'driven') return { planned, response: null, warnings: [] };
  const settled = Math.min(settlingTicksOf(candidate.rounded), Math.floor(ticks / 8));
  return { planned, ...learnResponse(candidate.rounded, calm, { fromTick: settled, toTick: ticks }, planned) };
}

/** A table of squared errors without a plan, under a perfect one and under a wrong one; empty where plans reach nothing. */
export function planWorthText(worth: PlanWorth | null): string {
  if (worth === null) return '';
  const { none, perfect, wrong } = worth.trials;
  const share = (mse: number, i: number): string => {
    const without = none.mean[i];
    const text = Number.isFinite(mse / without) ? `${((100 * mse) / without).toFixed(0)} %` : '-';
    return text;
  };
  const rows = worth.signals.map((signal, i) => [
    signal,
    none.mean[i].toPrecision(3),
    share(perfect.mean[i], i),
    share(wrong.mean[i], i),
  ]);
  const head = ['signal', 'no plan: mse', 'what came, as plan', 'a wrong plan'];
  return [
    `Under plans of ${worth.inputs.join(', ')}, ${worth.origins} origins (standardised squared error; then its share of that without a plan):`,
    textTable(head, rows, [1, 2, 3]),
    '',
  ].join('\n');
}
