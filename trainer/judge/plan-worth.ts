/**
 * What plans of the inputs are worth at a site: the same origins forecast without a plan, with what truly came, and with a
 * plan that was not kept. The second must lie below the first; the third shows what trusting a wrong plan costs.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { type PlanTrial, plannerOf } from './plan-trial.ts';
import { bySignal, replayMse } from './replay-scores.ts';

/**
 * shapes  mse of each trial (ny × H), entry i·H + h - 1; mean (ny) over the steps
 * units   standardised²
 */
export interface PlanWorth {
  readonly signals: readonly string[];
  /** Inputs that were planned. */
  readonly inputs: readonly string[];
  readonly origins: number;
  readonly trials: Readonly<Record<PlanTrial, { readonly mse: Float64Array; readonly mean: readonly number[] }>>;
}

/** Origins used are thinned to about this many: a mean of more says the same. */
const MOST_ORIGINS = 3000;

/**
 * Inputs of a model that plans reach, counted from the first input.
 *
 * shapes  wanted: inputs that have plans, counted likewise
 * units   none
 * throws  nothing
 * source  none
 * cost    trivial
 */
function reachedInputs(model: Model, wanted: readonly number[]): readonly number[] {
  if (model.kind === 'driven') return wanted;
  const inputs = [...(model.response?.inputs ?? [])];
  return wanted.filter((u) => inputs.includes(u));
}

/**
 * Replays a span once a trial; null where plans reach no input.
 *
 * shapes  span of indices into the series; planned counted from the first input
 * units   standardised²
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    three replays
 */
export function planWorth(model: Model, series: Series, span: TickSpan, planned: readonly number[]): PlanWorth | null {
  const reached = reachedInputs(model, planned);
  if (reached.length === 0) return null;
  const { signalCount: ny, horizon: H } = model;
  const count = span.toTick - span.fromTick - H + 1;
  const every = Math.max(1, Math.ceil(count / MOST_ORIGINS));
  const trial = (name: PlanTrial) => {
    const planner = plannerOf(name, model, series, span, reached);
    const mse = replayMse(model, series, span, { planner, every });
    return { mse, mean: Array.from(bySignal(model, mse)) };
  };
  return {
    signals: series.names.slice(0, ny),
    inputs: reached.map((u) => series.names[ny + u]),
    origins: Math.ceil(count / every),
    trials: { none: trial('none'), perfect: trial('perfect'), wrong: trial('wrong') },
  };
}

/**
 * The same for other programs; empty where there is nothing to say.
 *
 * shapes  `under_plans.signals` in the signals' order
 * units   standardised²
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function planWorthJson(worth: PlanWorth | null): Record<string, unknown> {
  if (worth === null) return {};
  const { none, perfect, wrong } = worth.trials;
  const figure = (value: number): number | null => (Number.isFinite(value) ? value : null);
  const signals = worth.signals.map((signal, i) => ({
    signal,
    mse_standardised_no_plan: figure(none.mean[i]),
    mse_standardised_what_came: figure(perfect.mean[i]),
    mse_standardised_wrong_plan: figure(wrong.mean[i]),
  }));
  return { under_plans: { inputs: worth.inputs, origins: worth.origins, signals } };
}
