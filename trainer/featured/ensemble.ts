/**
 * An ensemble of members that differ in the draw of their features alone, and the choice of its settings. Held-out error
 * ranks single draws poorly, so outputs are averaged, and settings are compared by averages too.
 */
import { drawFeatures } from '@stillwell/runtime/filter';
import type { Effort } from './effort.ts';
import {
  type DrivenRecord,
  freeRun,
  freeRunProblem,
  type MemberFeatures,
  type MemberShape,
  parameterLayout,
} from './free-run.ts';
import { minimise } from './levenberg-marquardt.ts';
import { type LinearStart, NO_FEATURES } from './linear-start.ts';

/** What an ensemble is made with. */
export interface Setting {
  readonly hiddenCount: number;
  readonly featureCount: number;
  /** Width of the kernel, in standard deviations of states and inputs. */
  readonly width: number;
  /** Of the squared feature gains, beside half the squared errors. */
  readonly penalty: number;
}

/** One fitted member. */
export interface Member {
  readonly shape: MemberShape;
  readonly features: MemberFeatures;
  readonly parameters: Float64Array;
}

/** What the sensor can show of each signal, standardised. */
export interface SensorRange {
  readonly low: Float64Array;
  readonly high: Float64Array;
}

const TURN = 2 * Math.PI;

/**
 * Fits members from a linear start.
 *
 * shapes  seeds: one member each
 * units   standardised
 * throws  nothing
 * source  free-run fit by Levenberg-Marquardt, see free-run.ts
 * cost    `iterations` linearisations a member
 */
export function fitMembers(
  record: DrivenRecord,
  start: LinearStart,
  setting: Setting,
  seeds: readonly number[],
  iterations: number,
): Member[] {
  const shape = { ...start.shape, featureCount: setting.featureCount };
  const { count, startAt } = parameterLayout(shape);
  const plain = parameterLayout(start.shape);
  const first = new Float64Array(count);
  first.set(start.parameters.subarray(0, plain.gainAt));
  first.set(start.parameters.subarray(plain.startAt), startAt);
  return seeds.map((seed) => {
    const features = featuresOf(shape, setting.width, seed);
    const { parameters } = minimise(freeRunProblem(shape, features, record, setting.penalty), first, iterations);
    return { shape, features, parameters };
  });
}

/**
 * Features of a member, as the gateway will draw them.
 *
 * shapes  as MemberFeatures
 * units   radians
 * throws  nothing
 * source  runtime/filter/featured-draw.ts
 * cost    one draw
 */
export function featuresOf(shape: MemberShape, width: number, seed: number): MemberFeatures {
  const { frequencies, phases } = drawFeatures(seed, shape.featureCount, parameterLayout(shape).width - 1);
  return {
    frequencies: frequencies.map((turns) => (TURN * turns) / width),
    phases: phases.map((turns) => TURN * turns),
  };
}

/**
 * Mean over the members of their clipped free runs.
 *
 * shapes  result (ny) of (to − from)
 * units   standardised
 * throws  nothing
 * source  none
 * cost    a run a member
 */
export function averageRun(members: readonly Member[], record: DrivenRecord, range: SensorRange): Float64Array[] {
  const out = record.signals.map(() => new Float64Array(record.to - record.from));
  for (const { shape, features, parameters } of members) {
    freeRun(shape, features, parameters, record).forEach((run, i) => {
      for (let t = 0; t < run.length; t++) {
        out[i][t] += Math.max(range.low[i], Math.min(range.high[i], run[t])) / members.length;
      }
    });
  }
  return out;
}

/**
 * Mean squared error of a run over its ticks from `from` on, averaged over the signals' readings.
 *
 * shapes  run (ny) of (record.to − record.from)
 * units   standardised²
 * throws  nothing; NaN where no reading stands
 * source  none
 * cost    one pass
 */
export function runError(run: readonly Float64Array[], record: DrivenRecord, from: number): number {
  let sum = 0;
  let count = 0;
  record.signals.forEach((y, i) => {
    for (let t = from; t < record.to; t++) {
      const error = run[i][t - record.from] - y[t];
      if (Number.isNaN(error)) continue;
      sum += error * error;
      count++;
    }
  });
  return sum / count;
}

/** Wide and heavily penalised: beyond what was learned, narrow features lead anywhere. */
const FIRST_TRY = { width: 8, penalty: 1 } as const;
/** Features are taken at all only for this gain on the best linear simulation … */
const LEAST_GAIN = 0.1;
/** … and a hidden state more only for this one, in squared error. */
const HIDDEN_GAIN = 0.1;

/**
 * Chooses settings by the averaged free run on held-out time; null where features hardly gain on a linear simulation.
 *
 * shapes  starts by number of hidden states, rising; record.to the end of the held-out part, learnTo its beginning
 * units   standardised
 * throws  nothing
 * source  one setting changed at a time, from one that is seldom bad
 * cost    as the effort says
 */
export function chooseSetting(
  record: DrivenRecord,
  learnTo: number,
  starts: readonly LinearStart[],
  range: SensorRange,
  effort: Effort,
): { readonly setting: Setting; readonly start: LinearStart; readonly error: number } | null {
  const learn = { ...record, to: learnTo };
  const { featureCount, widths, penalties, trialSeeds, trialIterations } = effort;
  const attempt = (start: LinearStart, setting: Setting): Tried => {
    const members = fitMembers(learn, start, setting, trialSeeds, trialIterations);
    return { setting, start, error: runError(averageRun(members, record, range), record, learnTo) };
  };
  let best: Tried | null = null;
  for (const start of starts) {
    const tried = attempt(start, { ...FIRST_TRY, featureCount, hiddenCount: start.shape.hiddenCount });
    if (best === null || tried.error < best.error * (1 - HIDDEN_GAIN)) best = tried;
  }
  const linear = starts.map((start) =>
    runError(averageRun([{ ...start, features: NO_FEATURES }], record, range), record, learnTo),
  );
  if (best === null || !(best.error < Math.min(...linear) * (1 - LEAST_GAIN))) return null;
  let at: Tried = best;
  for (const width of widths) {
    const tried = attempt(at.start, { ...(best as Tried).setting, width });
    if (tried.error < at.error) at = tried;
  }
  const middle = at;
  for (const penalty of penalties) {
    const tried = attempt(at.start, { ...middle.setting, penalty });
    if (tried.error < at.error) at = tried;
  }
  return at;
}

interface Tried {
  readonly setting: Setting;
  readonly start: LinearStart;
  readonly error: number;
}
