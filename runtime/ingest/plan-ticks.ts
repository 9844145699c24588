/** One value of a plan for a tick, by the input's aggregate: a plan's values hold until the next, as commands do. */
import type { Aggregate, Plan } from '@stillwell/protocol';

/**
 * The plan's value for a tick; NaN where the plan says nothing of it.
 *
 * 'last' takes the value in force last within the tick; 'mean', 'min' and 'max' take what is in force of the tick's time;
 * with 'sum' and 'increment' a value is the amount up to the next one, spread evenly.
 */
export function planAtTick(plan: Plan, how: Aggregate, tick: number, tickMs: number): number {
  const fromMs = Math.max(tick * tickMs, plan.timesMs[0]!);
  const toMs = Math.min((tick + 1) * tickMs, plan.endMs);
  if (fromMs >= toMs) return Number.NaN;
  let k = inForce(plan.timesMs, fromMs);
  if (how === 'last') {
    // The value that begins at the very end belongs to the next tick.
    while (k + 1 < plan.timesMs.length && plan.timesMs[k + 1]! < toMs) k++;
    return plan.values[k]!;
  }
  let sum = 0;
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let at = fromMs; at < toMs; k++) {
    const endMs = k + 1 < plan.timesMs.length ? plan.timesMs[k + 1]! : plan.endMs;
    const until = Math.min(toMs, endMs);
    const value = plan.values[k]!;
    const isAmount = how === 'sum' || how === 'increment';
    sum += isAmount ? (value * (until - at)) / (endMs - plan.timesMs[k]!) : value * (until - at);
    low = Math.min(low, value);
    high = Math.max(high, value);
    at = until;
  }
  if (how === 'min') return low;
  if (how === 'max') return high;
  return how === 'mean' ? sum / (toMs - fromMs) : sum;
}

/** Index of the value in force at a moment not before the first. */
function inForce(timesMs: readonly number[], atMs: number): number {
  let low = 0;
  let high = timesMs.length - 1;
  while (low < high) {
    const middle = (low + high + 1) >> 1;
    if (timesMs[middle]! <= atMs) low = middle;
    else high = middle - 1;
  }
  return low;
}
