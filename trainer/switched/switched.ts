/**
 * The switched kind as a candidate: the section learned, rounded, given to the signals that it forecasts better than the
 * linear kind on the calibration part, and a linear model under it as large as the bytes still allow.
 */
import type { SwitchedTensors } from '@stillwell/protocol';
import { type BankModel, type SwitchedModel, type SwitchedSection, sectionOf } from '@stillwell/runtime/filter';
import { chooseSize, sizeBytes } from '../identify/order.ts';
import { completedValues, teachAgain } from '../identify/teach.ts';
import type { Attempt, Candidate, KindSections } from '../kinds/candidate.ts';
import { linearOfSize } from '../kinds/linear.ts';
import type { Learned, Size } from '../quantise/quantise.ts';
import { fitCorrection } from './correction.ts';
import { learnSwitched, type SwitchedInput } from './learn.ts';
import { switchedTensors } from './round.ts';
import { findShares } from './share.ts';

/** The least linear model under a section. */
const LEAST_BASE: Size = { order: 8, basisCount: 4, hasOwn: false };
/** Rounds of trying a smaller base until the document fits. */
const MOST_ROUNDS = 4;
/** A signal is given to the section only for this gain in squared error over the linear kind. */
const LEAST_GAIN = 0.005;

/**
 * The switched candidate; null, and quickly, where no near-discrete signal drives another.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    learning, two replays of the calibration part
 */
export function trySwitched(asked: Attempt): Candidate | null {
  const input = inputOf(asked, asked.prepared.learnTicks);
  const section = learnSwitched(input);
  if (section === null) return null;
  const attempt = withoutRound(asked);
  const given = giveSignals(attempt, withCorrection(section, input, attempt));
  // Moments of the calibration part are those of the history less its round: a size is chosen by them only without one.
  return given === null ? null : fitted(attempt, asked.taught.round === null, given);
}

/**
 * The attempt with no round taken away: a mode does not show in what a signal does beyond a round ago. Where there was one,
 * the linear map is learned once more without it.
 */
function withoutRound(attempt: Attempt): Attempt {
  const { prepared, taught, around } = attempt;
  if (taught.round === null) return attempt;
  const plain = { ...taught, round: null };
  return {
    ...attempt,
    taught: { ...plain, learned: teachAgain(prepared, plain, prepared.learnTicks) },
    around: { ...around, round: null },
  };
}

/** The completed history as the section learns it. */
function inputOf(attempt: Attempt, learnTicks: number): SwitchedInput {
  const { prepared, taught, around, series } = attempt;
  return {
    values: completedValues(prepared, taught, learnTicks),
    isRead: prepared.filled.isRead,
    signalCount: around.signalCount,
    horizon: around.horizon,
    periodTicks: around.season.periodTicks,
    firstTick: series.firstTick,
    learnTicks,
  };
}

function withCorrection(section: SwitchedSection, input: SwitchedInput, { around }: Attempt): SwitchedSection {
  const { scalings } = around;
  const low = Float64Array.from(scalings, ({ clipLow, mean, scale }) => (clipLow - mean) / scale);
  const high = Float64Array.from(scalings, ({ clipHigh, mean, scale }) => (clipHigh - mean) / scale);
  return { ...section, correction: fitCorrection(section, input, { low, high }) };
}

/** The section with its shares, for those signals alone that it helps; null if none. */
function giveSignals(attempt: Attempt, section: SwitchedSection): SwitchedSection | null {
  const { split, series, prepared, taught, around } = attempt;
  const span = {
    fromTick: split.calibrate.fromTick - series.firstTick,
    toTick: split.calibrate.toTick - series.firstTick,
  };
  const { float } = linearOfSize(attempt, taught.learned, judgedSize(attempt));
  const whole = joined(float as BankModel, section);
  const { share, ratio } = findShares(float, whole, Array.from(section.forecast), prepared.calm, span);
  const keeps = Array.from(ratio, (value) => value < 1 - LEAST_GAIN);
  return keeps.includes(true) ? onlyFor({ ...section, share }, keeps, around.horizon) : null;
}

/** The size that the linear kind would have by itself. */
function judgedSize({ taught, around }: Attempt): Size {
  const basisCount = Math.min(12, around.horizon);
  return { order: Math.min(32, taught.learned.bottleneck.carried.length), basisCount, hasOwn: false };
}

/** The section with the rows of the signals it keeps. */
function onlyFor(section: SwitchedSection, keeps: readonly boolean[], horizon: number): SwitchedSection {
  const { forecast, correction } = section;
  const rows = correction.readout.length / Math.max(1, forecast.length);
  const readout = keeps.flatMap((keep, q) =>
    keep ? Array.from(correction.readout.subarray(q * rows, (q + 1) * rows)) : [],
  );
  const limit = correction.limit.filter((_, q) => keeps[q]);
  const isUsed = limit.some((value) => value > 0);
  return {
    ...section,
    forecast: forecast.filter((_, q) => keeps[q]),
    share: section.share.filter((_, at) => keeps[Math.floor(at / horizon)]),
    correction: isUsed
      ? { ...correction, readout: Float64Array.from(readout), limit }
      : { count: 0, readout: new Float64Array(0), basis: new Float64Array(0), limit },
  };
}

/** The candidate with the largest base that fits; null where not even the least does. */
function fitted(attempt: Attempt, mayChoose: boolean, section: SwitchedSection): Candidate | null {
  const { learned } = attempt.taught;
  const tensors = switchedTensors(section, attempt.around.horizon);
  const sectionsOf = (size: Size): KindSections => ({
    ...linearOfSize(attempt, learned, size).sections,
    kind: 'switched',
    switched: tensors,
  });
  const free = attempt.bytesLeft(sectionsOf(LEAST_BASE));
  if (free < 0) return null;
  let tensorBytes = free + sizeBytes(LEAST_BASE, learned);
  for (let round = 0; round < MOST_ROUNDS; round++) {
    const size = mayChoose ? chooseSize(learned, attempt.taught.calibrationMoments, tensorBytes) : judgedSize(attempt);
    const left = attempt.bytesLeft(sectionsOf(size));
    if (left >= 0) return candidateOf(attempt, learned, size, section, tensors);
    if (!mayChoose) break;
    tensorBytes += left;
  }
  return candidateOf(attempt, learned, LEAST_BASE, section, tensors);
}

function candidateOf(
  attempt: Attempt,
  learned: Learned,
  size: Size,
  section: SwitchedSection,
  tensors: SwitchedTensors,
): Candidate {
  const { prepared, taught, site, around } = attempt;
  const base = linearOfSize(attempt, learned, size);
  const names = Array.from(section.forecast, (i) => site.signals[i].name);
  return {
    kind: 'switched',
    name: `${section.modeCount} modes for ${names.join(', ')}; under it ${base.name}`,
    float: joined(base.float as BankModel, section),
    rounded: joined(base.rounded as BankModel, sectionOf(tensors, base.rounded)),
    sections: { ...base.sections, kind: 'switched', switched: tensors },
    settled: {
      ...base.settled,
      modes: section.modeCount,
      discrete: Array.from(section.discrete, (i) => site.signals[i].name),
      driven: Array.from(section.driven, (i) => site.signals[i].name),
      forecast: names,
      correction: section.correction.count,
    },
    again(ticks) {
      const more = learnMore(attempt, section, ticks);
      const again = teachAgain(prepared, taught, ticks);
      return candidateOf(attempt, again, size, more, switchedTensors(more, around.horizon));
    },
  };
}

/** The section learned from the first `ticks` ticks, for the same signals; as it stood, if the modes are other ones. */
function learnMore(attempt: Attempt, section: SwitchedSection, ticks: number): SwitchedSection {
  const input = inputOf(attempt, ticks);
  const found = learnSwitched(input);
  const isSame =
    found !== null &&
    found.modeCount === section.modeCount &&
    found.discrete.join() === section.discrete.join() &&
    found.driven.join() === section.driven.join();
  if (!isSame) return section;
  const full = section.correction.count > 0 ? withCorrection(found, input, attempt) : found;
  const keeps = Array.from(full.forecast, (i) => section.forecast.includes(i));
  return { ...onlyFor(full, keeps, attempt.around.horizon), share: section.share };
}

function joined(base: BankModel, switched: SwitchedSection): SwitchedModel {
  return { ...base, kind: 'switched', switched };
}
