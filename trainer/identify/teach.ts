/**
 * Learning in one pass, or in two where readings are missing: a first model is fitted to the history completed by lines
 * and seasons, then runs over it and puts its own one-step forecast wherever no reading was folded in (zero innovation,
 * as on the gateway), and the map is learned once more from that. Spikes the guard would pass over are mended likewise.
 */
import type { Model, Round } from '@stillwell/runtime/filter';
import { calibrate } from '../judge/calibrate.ts';
import { replayPaths } from '../judge/replay.ts';
import { floatModel, openCalibration } from '../quantise/float-model.ts';
import { floatFactors, type Learned } from '../quantise/quantise.ts';
import type { Choice } from './choose.ts';
import type { Filled } from './fill.ts';
import { type LearnOutput, learn, learnAgain } from './learn.ts';
import type { Moments } from './moments.ts';
import { learnInput, type Prepared } from './prepare.ts';
import { chooseRound, withoutRound } from './round.ts';

/** What was learned. */
export interface Taught {
  readonly choice: Choice;
  /** Taken away before anything is learned; null: nothing. */
  readonly round: Round | null;
  readonly learned: Learned;
  readonly calibrationMoments: Moments;
  /** The model that stood in for missing readings; null where too few are missing for a second pass. */
  readonly passing: Model | null;
  readonly warnings: readonly string[];
}

/** Share of missing readings in the learning part from which a second pass is worth its time. */
const SECOND_PASS_SHARE = 0.002;
/** Size of the passing model: its forecasts only bridge gaps. */
const PASS_ORDER = 32;
const PASS_BASIS = 12;
const PASS_COVERAGE = 0.9;

/**
 * Learns.
 *
 * shapes  as LearnInput
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  fill by one's own forecast: Shumway & Stoffer, Journal of Time Series Analysis 3 (1982), means only
 * cost    one or two passes of learning, and one replay between them
 */
export function teach(prepared: Prepared): Taught {
  const round = chooseRound(learnInput(prepared, null), prepared.around.tickMs, prepared.earlier?.longestRound);
  const first = learn(learnInput(prepared, round));
  const gaps = 'Long gaps cover more than half of the history; they had to be bridged and learned from.';
  const warnings = [...(first.usesLongGaps ? [gaps] : []), ...first.notes];
  const { choice, calibration: calibrationMoments, learned } = first;
  const isWhole = missingShare(prepared) < SECOND_PASS_SHARE;
  const passing = isWhole ? null : passingModel(prepared, first, round);
  const base = { choice, round, calibrationMoments, passing, warnings };
  if (isWhole) return { ...base, learned };
  return { ...base, learned: teachAgain(prepared, base, prepared.learnTicks) };
}

/**
 * Learns from the first `ticks` ticks with what was chosen, missing readings bridged as in `teach`.
 *
 * shapes  ticks at most the series'
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  as `teach`
 * cost    one pass of learning, and one replay where readings are missing
 */
export function teachAgain(
  prepared: Prepared,
  { choice, round, passing }: Pick<Taught, 'choice' | 'round' | 'passing'>,
  ticks: number,
): Learned {
  const filled = passing === null ? prepared.filled : refill(prepared, passing, ticks);
  return learnAgain({ ...learnInput(prepared, round), filled }, choice, ticks);
}

/**
 * The history that `teachAgain` learns from: completed, and less its rounds.
 *
 * shapes  (nc) of (ticks of the series)
 * units   standardised
 * throws  FilterError if the model does not fit the series
 * source  as `teach`
 * cost    one replay where readings are missing
 */
export function completedHistory(
  prepared: Prepared,
  { round, passing }: Pick<Taught, 'round' | 'passing'>,
  ticks: number,
): Filled {
  const filled = passing === null ? prepared.filled : refill(prepared, passing, ticks);
  return round === null ? filled : withoutRound(filled, round, prepared.around.signalCount);
}

/**
 * The completed history with its rounds in it.
 *
 * shapes  (nc) of (ticks of the series)
 * units   standardised
 * throws  FilterError if the model does not fit the series
 * source  as `teach`
 * cost    one replay where readings are missing
 */
export function completedValues(
  prepared: Prepared,
  { passing }: Pick<Taught, 'passing'>,
  ticks: number,
): readonly Float64Array[] {
  return completedHistory(prepared, { round: null, passing }, ticks).values;
}

function missingShare({ filled, around, learnTicks }: Prepared): number {
  let missing = 0;
  for (const read of filled.isRead.slice(0, around.signalCount)) {
    for (let t = 0; t < learnTicks; t++) missing += 1 - read[t];
  }
  return missing / (around.signalCount * learnTicks);
}

function passingModel(prepared: Prepared, first: LearnOutput, round: Round | null): Model {
  const { around, calm, learnTicks, calibrateTicks } = prepared;
  const { learned, choice } = first;
  const order = Math.min(PASS_ORDER, learned.bottleneck.carried.length);
  const factors = floatFactors(learned, { order, basisCount: Math.min(PASS_BASIS, around.horizon), hasOwn: false });
  const surroundings = { ...around, bank: choice.bank, round, coverage: PASS_COVERAGE, boundsRate: 0.05 };
  const open = floatModel(
    factors,
    surroundings,
    openCalibration(around.scalings.length, around.signalCount * around.horizon),
  );
  const calibration = calibrate(
    open,
    calm,
    { fromTick: learnTicks, toTick: learnTicks + calibrateTicks },
    PASS_COVERAGE,
  );
  return floatModel(factors, surroundings, calibration);
}

/** The completed history with the passing model's folded values in its first `ticks` ticks. */
function refill({ around, calm, filled }: Prepared, passing: Model, ticks: number): Filled {
  const values = filled.values.map((z) => z.slice());
  replayPaths(passing, calm, { fromTick: 0, toTick: ticks }, ({ at, state }) => {
    for (let i = 0; i < around.signalCount; i++) if (state.started[i] === 1) values[i][at] = state.value[i];
  });
  return { ...filled, values };
}
