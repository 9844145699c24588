/**
 * The driven kind as a candidate: short records of plants whose inputs make the signals. A linear simulation comes first; if
 * the inputs do not explain the signals with that, nothing more is tried.
 */

import type { Attempt, Candidate } from '../kinds/candidate.ts';
import { joined } from '../linalg/joined.ts';
import { type DrivenParts, drivenModel, drivenSection } from './driven-parts.ts';
import { type Effort, type Planned, planEffort } from './effort.ts';
import {
  averageRun,
  chooseSetting,
  fitMembers,
  type Member,
  runError,
  type SensorRange,
  type Setting,
} from './ensemble.ts';
import { fadingTimes, fitDeviation, fitLead } from './fading.ts';
import type { DrivenRecord } from './free-run.ts';
import { fitLinearStart, type LinearStart, NO_FEATURES } from './linear-start.ts';
import { sensorRange } from './sensor-range.ts';
import { forgettingTicks, hiddenStarts } from './simulation-start.ts';

/** Beyond this a record is long enough for kinds that need no simulation, and a fit takes minutes. */
const MOST_TICKS = 5000;
const MOST_SIGNALS = 4;
const MOST_INPUTS = 8;
const HIDDEN_COUNTS = [0, 1, 2] as const;
/** Learned once more, members may see so many times the ticks that the search did. */
const MOST_AGAIN = 2;
/** Share of the signals' variance on held-out time that the linear simulation must explain. */
const LEAST_EXPLAINED = 0.6;

/**
 * The driven candidate; null for a record without inputs that ever vary, a long or wide one, or one whose inputs do not explain the signals.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  nothing of its own
 * source  random features in a state space fitted on its free run, averaged over draws
 * cost    as effort.ts plans it; a few linear simulations where the inputs do not explain the signals
 */
export function tryDriven(attempt: Attempt): Candidate | null {
  const { prepared, around } = attempt;
  const nu = around.scalings.length - around.signalCount;
  const { learnTicks, calibrateTicks } = prepared;
  if (nu < 1 || nu > MOST_INPUTS || around.signalCount > MOST_SIGNALS || learnTicks > MOST_TICKS) return null;
  if (around.scalings.slice(around.signalCount).every(({ isConstant }) => isConstant)) return null;
  const planned = planEffort(around.signalCount, nu, HIDDEN_COUNTS, learnTicks);
  if (planned === null) return null;
  const { effort, mostTicks } = planned;
  const record = recordOf(attempt, learnTicks - mostTicks, learnTicks + calibrateTicks);
  const learnTo = mostTicks;
  const learn = { ...record, to: learnTo };
  const range = sensorRange(learn);
  const starts = HIDDEN_COUNTS.map((count) => fitLinearStart(learn, count)).filter((start) => start !== null);
  if (!starts.some((start) => explains(start, record, learnTo))) return null;
  // A hidden state too many may never forget where it began; fewer are tried then.
  for (let left = starts; left.length > 0; ) {
    const choice = chooseSetting(record, learnTo, left, range, effort);
    if (choice === null) return null;
    const parts = learnedParts(attempt, choice.setting, record, range, planned);
    if (parts !== null) return candidateOf(attempt, parts, planned);
    left = left.filter(({ shape }) => shape.hiddenCount < choice.setting.hiddenCount);
  }
  return null;
}

/** Members from the learning part, and how their deviations fade, from the calibration part too. */
function learnedParts(
  attempt: Attempt,
  setting: Setting,
  record: DrivenRecord,
  range: SensorRange,
  { effort, mostTicks: learnTicks }: Planned,
): DrivenParts | null {
  const { horizon } = attempt.around;
  const learn = { ...record, to: learnTicks };
  const members = membersOf(learn, setting, attempt.options.seed, effort);
  const run = averageRun(members, record, range);
  const times = fadingTimes(horizon, learnTicks);
  return partsOf(attempt, setting, members, learn, {
    range,
    times,
    deviationGain: joined(record.signals.map((y, i) => fitDeviation(difference(y, run[i]), times, horizon))),
    inputGain: joined(record.inputs.map((u) => fitLead(u.subarray(0, learnTicks), times, horizon))),
  });
}

type Fades = Pick<DrivenParts, 'range' | 'times' | 'deviationGain' | 'inputGain'>;

/** Null where the simulation never forgets where it began. */
function partsOf(
  attempt: Attempt,
  setting: Setting,
  members: readonly Member[],
  learn: DrivenRecord,
  fades: Fades,
): DrivenParts | null {
  const start = hiddenStarts(members, learn);
  const draft = { ...fades, setting, seed: attempt.options.seed, members, start, settleTicks: 0 };
  const settleTicks = forgettingTicks(drivenModel(draft, attempt.around, true), learn);
  return settleTicks === null ? null : { ...draft, settleTicks };
}

function candidateOf(attempt: Attempt, parts: DrivenParts, planned: Planned): Candidate | null {
  const sections = { kind: 'driven' as const, driven: drivenSection(parts) };
  if (attempt.bytesLeft(sections) < 0) return null;
  const { setting, members } = parts;
  const { hiddenCount, featureCount, width, penalty } = setting;
  return {
    kind: 'driven',
    name: `${members.length} simulations of ${attempt.around.signalCount + hiddenCount} states, ${featureCount} features`,
    float: drivenModel(parts, attempt.around, false),
    rounded: drivenModel(parts, attempt.around, true),
    sections,
    settled: { members: members.length, hidden: hiddenCount, features: featureCount, width, penalty },
    again(ticks) {
      const record = recordOf(attempt, Math.max(0, ticks - MOST_AGAIN * planned.mostTicks), ticks);
      const more = partsOf(attempt, setting, membersOf(record, setting, parts.seed, planned.effort), record, parts);
      const again = more === null ? null : candidateOf(attempt, more, planned);
      return again ?? (candidateOf(attempt, parts, planned) as Candidate);
    },
  };
}

function membersOf(record: DrivenRecord, setting: Setting, seed: number, effort: Effort): Member[] {
  const start = fitLinearStart(record, setting.hiddenCount);
  if (start === null) return [];
  const seeds = Array.from({ length: effort.members }, (_, k) => seed + k);
  return fitMembers(record, start, setting, seeds, effort.iterations);
}

function explains(start: LinearStart, record: DrivenRecord, learnTo: number): boolean {
  const range = { low: record.signals.map(() => -4), high: record.signals.map(() => 4) };
  const member = { ...start, features: NO_FEATURES };
  const sensor = { low: Float64Array.from(range.low), high: Float64Array.from(range.high) };
  const run = averageRun([member], record, sensor);
  return runError(run, record, learnTo) < (1 - LEAST_EXPLAINED) * variance(record, learnTo);
}

function variance({ signals, to }: DrivenRecord, from: number): number {
  let total = 0;
  let count = 0;
  for (const y of signals) {
    const read = y.subarray(from, to).filter((value) => !Number.isNaN(value));
    const mean = read.reduce((sum, value) => sum + value, 0) / read.length;
    for (const value of read) total += (value - mean) * (value - mean);
    count += read.length;
  }
  return total / count;
}

/** Ticks from `start` to before `end`, counted from the first of them: readings as they stood, inputs completed. */
function recordOf({ prepared, around }: Attempt, start: number, end: number): DrivenRecord {
  const { values, isRead } = prepared.filled;
  const ny = around.signalCount;
  return {
    signals: values
      .slice(0, ny)
      .map((z, i) => z.slice(start, end).map((value, t) => (isRead[i][start + t] === 1 ? value : Number.NaN))),
    inputs: values.slice(ny).map((u) => u.slice(start, end)),
    from: 0,
    to: end - start,
  };
}

function difference(y: Float64Array, run: Float64Array): Float64Array {
  return run.map((value, t) => y[t] - value);
}
