/** Every pair of modes that follow each other: when the one gives way to the other, and where that leaves the plant. */
import type { SwitchedSection } from '@stillwell/runtime/filter';
import type { Drift, DrivenHistory } from './drift.ts';
import { fitHazard, fitLanding, type Outcomes } from './switching.ts';

/** Switches of a pair below which it is left out: the mode is then only ever entered by a reading. */
const LEAST_SWITCHES = 4;
/** The dwell counts up to this many usual stays. */
const DWELL_STAYS = 2;

/**
 * Hazards and landings of all pairs of modes that were seen to follow each other.
 *
 * shapes  next (n) of (T): the disturbance expected at each tick by what was known a tick before
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  switching.ts
 * cost    O(M T n²)
 */
export function learnSwitching(
  history: DrivenHistory,
  drift: Drift,
  next: readonly Float64Array[],
): Pick<SwitchedSection, 'pairFrom' | 'pairTo' | 'landing' | 'hazard' | 'dwellLimit'> {
  const { modeCount: M, mode, ticks } = history;
  const n = history.values.length;
  const dwellOf = dwells(mode, ticks);
  const dwellLimit = Math.max(2, Math.round(DWELL_STAYS * usualStay(mode, ticks)));
  const pairFrom: number[] = [];
  const pairTo: number[] = [];
  const landing: number[] = [];
  const hazard: number[] = [];
  for (let from = 0; from < M; from++) {
    const outcomes = outcomesOf(history, drift, next, dwellOf, from);
    for (let to = 0; to < M; to++) {
      if (to === from) continue;
      const at: number[] = [];
      for (let e = 0; e < outcomes.count; e++) if (outcomes.to[e] === to) at.push(e);
      if (at.length < LEAST_SWITCHES) continue;
      pairFrom.push(from);
      pairTo.push(to);
      hazard.push(...fitHazard(outcomes, n, to, dwellLimit));
      landing.push(...landingsOf(history, drift, next, outcomes, at, to));
    }
  }
  return {
    pairFrom: Int32Array.from(pairFrom),
    pairTo: Int32Array.from(pairTo),
    landing: Float64Array.from(landing),
    hazard: Float64Array.from(hazard),
    dwellLimit,
  };
}

interface SeenOutcomes extends Outcomes {
  /** (count) tick of the outcome. */
  readonly tick: Int32Array;
}

function outcomesOf(
  history: DrivenHistory,
  drift: Drift,
  next: readonly Float64Array[],
  dwellOf: Int32Array,
  from: number,
): SeenOutcomes {
  const { mode, isRead, ticks } = history;
  const n = history.values.length;
  const seen: number[] = [];
  for (let t = 1; t < ticks; t++) {
    if (mode[t - 1] !== from || mode[t] < 0) continue;
    if (isRead.every((read) => read[t] === 1 && read[t - 1] === 1)) seen.push(t);
  }
  const along = new Float64Array(seen.length * n);
  seen.forEach((t, e) => {
    for (let i = 0; i < n; i++) along[e * n + i] = wouldBe(history, drift, next, from, i, t);
  });
  return {
    along,
    dwell: Float64Array.from(seen, (t) => dwellOf[t - 1]),
    to: Int8Array.from(seen, (t) => mode[t]),
    count: seen.length,
    tick: Int32Array.from(seen),
  };
}

/** Value of driven signal i at tick t had the mode `m` lasted. */
function wouldBe(
  { values }: DrivenHistory,
  { drift, coupling }: Drift,
  next: readonly Float64Array[],
  m: number,
  i: number,
  t: number,
): number {
  const n = values.length;
  let sum = values[i][t - 1] + drift[m * n + i] + next[i][t];
  for (let j = 0; j < n; j++) sum += coupling[(m * n + i) * n + j] * values[j][t - 1];
  return sum;
}

/** (n × (1 + n)) landings of one pair, its switches at the outcomes `at`. */
function landingsOf(
  history: DrivenHistory,
  drift: Drift,
  next: readonly Float64Array[],
  outcomes: SeenOutcomes,
  at: readonly number[],
  to: number,
): number[] {
  const n = history.values.length;
  const along = new Float64Array(at.length * n);
  at.forEach((e, row) => {
    along.set(outcomes.along.subarray(e * n, (e + 1) * n), row * n);
  });
  return history.values.flatMap((z, i) => {
    const rest = Float64Array.from(at, (e) => {
      const t = outcomes.tick[e];
      return z[t] - (outcomes.along[e * n + i] + wouldBe(history, drift, next, to, i, t)) / 2;
    });
    return Array.from(fitLanding(along, rest, at.length, n));
  });
}

/** (ticks) ticks the mode has lasted at each tick, this one included. */
function dwells(mode: Int8Array, ticks: number): Int32Array {
  const out = new Int32Array(ticks);
  for (let t = 0; t < ticks; t++) out[t] = t > 0 && mode[t] === mode[t - 1] ? out[t - 1] + 1 : 1;
  return out;
}

/**
 * Mean ticks of a stay in a mode.
 *
 * shapes  mode (ticks or more)
 * units   ticks
 * throws  nothing
 * source  none
 * cost    O(ticks)
 */
export function usualStay(mode: Int8Array, ticks: number): number {
  let stays = 1;
  for (let t = 1; t < ticks; t++) if (mode[t] !== mode[t - 1]) stays++;
  return ticks / stays;
}
