/** The plant that the switched section assumes, step by step: see switched-section.ts. */
import type { SwitchedSection } from './switched-section.ts';
import { logistic } from './switched-table.ts';

/**
 * Where a mode takes the driven signals in one tick, without and with the disturbance's forecast.
 *
 * shapes  from (n numbers from fromAt), push (n), out (n)
 * cost    O(n²); allocates nothing
 */
export function goOn(
  section: SwitchedSection,
  mode: number,
  from: Float64Array,
  fromAt: number,
  push: Float64Array,
  out: Float64Array,
): void {
  const n = section.driven.length;
  const { drift, coupling } = section;
  for (let i = 0; i < n; i++) {
    let sum = from[fromAt + i] + drift[mode * n + i] + push[i];
    const row = (mode * n + i) * n;
    for (let j = 0; j < n; j++) sum += coupling[row + j] * from[fromAt + j];
    out[i] = sum;
  }
}

/**
 * Chance that a pair's switch happens at a tick at which its mode would bring the driven signals to `along`.
 *
 * shapes  along (n)
 * cost    O(n); allocates nothing
 */
export function switchChance(section: SwitchedSection, pair: number, along: Float64Array, dwell: number): number {
  const n = section.driven.length;
  const { hazard, dwellLimit } = section;
  const at = pair * (n + 2);
  let odds = hazard[at];
  for (let j = 0; j < n; j++) odds += hazard[at + 1 + j] * along[j];
  odds += hazard[at + 1 + n] * (Math.min(dwell, dwellLimit) / dwellLimit);
  return logistic(odds);
}

/**
 * What a mode says of a near-discrete signal, given the driven values.
 *
 * shapes  value (nc)
 * cost    O(n); allocates nothing
 */
export function discreteValue(section: SwitchedSection, mode: number, s: number, value: Float64Array): number {
  const { driven, discrete, centre, slope } = section;
  const row = (mode * discrete.length + s) * driven.length;
  let sum = centre[mode * discrete.length + s];
  for (let j = 0; j < driven.length; j++) sum += slope[row + j] * value[driven[j]];
  return sum;
}
