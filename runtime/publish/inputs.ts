/** What a tick's forecasts made of the inputs ahead: planned or not, by how old a plan, and how true plans have been. */
import type { InputOutlook, InputUse, Plan, Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { PlanKeeper } from '../ingest/plans.ts';
import type { Serving } from '../serving.ts';

/** One outlook an input, in the site's order. nowMs  the moment the forecasts are issued at */
export function inputOutlooks(serving: Serving, plans: PlanKeeper, site: Site, nowMs: number): InputOutlook[] {
  const { model } = serving;
  return site.inputs.map(({ name, unit }, u) => {
    const ruling = plans.inForce(u);
    const { error, heldError } = plans.record(u);
    const usual = usualError(model, u) ?? (model.kind === 'driven' ? heldError : null);
    return {
      input: name,
      unit,
      use: useOf(serving, ruling?.plan ?? null, u),
      planAgeMs: ruling === null || Number.isNaN(ruling.madeAtMs) ? null : Math.max(0, nowMs - ruling.madeAtMs),
      planUntilMs: ruling === null ? null : ruling.plan.endMs,
      planError: error === null ? null : short(error),
      usualError: usual === null ? null : short(usual),
    };
  });
}

/**
 * Why the forecast of a signal (or of any, where null) must not be trusted for its plans' sake; null: no reason. A plan
 * that is off by more than is usual without one does harm, and whoever reads the forecast must see that.
 */
export function planFault(
  serving: Serving,
  plans: PlanKeeper,
  outlooks: readonly InputOutlook[],
  signal: number | null,
): string | null {
  const { model } = serving;
  for (const [u, { use, input, unit, planError, usualError: usual }] of outlooks.entries()) {
    if (use !== 'planned' || planError === null || usual === null || planError <= usual) continue;
    if (plans.record(u).count < model.horizon || !listens(model, u, signal)) continue;
    return `${input}: what came differs from its plan by ${planError} ${unit} on average; ${usual} ${unit} is usual without a plan`;
  }
  return null;
}

/** Whether a plan of the input can change forecasts of the model. */
function reaches(model: Model, input: number): boolean {
  return model.kind === 'driven' || (model.response?.inputs.includes(input) ?? false);
}

/** What a forecast makes of an input under a plan, or under none. */
export function useOf({ model, tick }: Serving, plan: Plan | null, input: number): InputUse {
  const endMs = (tick + model.horizon + 1) * model.tickMs;
  if (plan !== null && plan.timesMs[0]! < endMs && reaches(model, input)) return 'planned';
  // Every kind but the driven one learned what the past says of its inputs; that one leads their last values on by itself.
  return model.kind === 'driven' ? 'held' : 'expected';
}

function listens(model: Model, input: number, signal: number | null): boolean {
  const { response } = model;
  if (response === undefined) return true;
  const which = response.inputs.indexOf(input);
  const filters = response.decays.length + 2;
  const np = response.inputs.length;
  for (let i = signal ?? 0; i < (signal === null ? model.signalCount : signal + 1); i++) {
    const at = (i * np + which) * filters;
    for (let b = 0; b < filters; b++) if (response.gain[at + b] !== 0) return true;
  }
  return false;
}

function usualError({ response, signalCount, scale }: Model, input: number): number | null {
  const which = response?.inputs.indexOf(input) ?? -1;
  return which < 0 ? null : response!.surprise[which]! * scale[signalCount + input]!;
}

/** Four digits say enough of a mean. */
function short(value: number): number {
  return Number(value.toPrecision(4));
}
