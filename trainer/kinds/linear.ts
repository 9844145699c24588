/**
 * The linear kind as a candidate: the largest bank and state that fit the bytes, unless smaller ones do as well.
 */

import { MAX_BUNDLE_BYTES } from '@stillwell/protocol';
import type { Round } from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';
import { bankName } from '../identify/bank.ts';
import { chooseSize, sizeBytes } from '../identify/order.ts';
import { teachAgain } from '../identify/teach.ts';
import { floatModel, openCalibration } from '../quantise/float-model.ts';
import { floatFactors, type Learned, roundedFactors, type Size } from '../quantise/quantise.ts';
import type { Attempt, Candidate, KindSections } from './candidate.ts';

/** Rounds of trying a smaller size until the document fits. */
const MOST_ROUNDS = 4;

/**
 * The linear candidate; always applies.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  TrainError 'fit' where not even one state fits the bytes
 * source  none
 * cost    a few factorisations
 */
export function tryLinear(attempt: Attempt): Candidate {
  const { learned, calibrationMoments } = attempt.taught;
  const least = { order: 1, basisCount: 1, hasOwn: false };
  const free = attempt.bytesLeft(sectionsOf(attempt, learned, least));
  let tensorBytes = free + sizeBytes(least, learned);
  for (let round = 0; free >= 0 && round < MOST_ROUNDS; round++) {
    const size = chooseSize(learned, calibrationMoments, tensorBytes);
    const left = attempt.bytesLeft(sectionsOf(attempt, learned, size));
    if (left >= 0) return linearOfSize(attempt, learned, size);
    tensorBytes += left;
  }
  const { maxBytes } = attempt.options;
  const fewer = 'shorten the horizon, or take fewer signals into the site file';
  const isHopeless = maxBytes - free > MAX_BUNDLE_BYTES;
  throw new TrainError(
    'fit',
    `--max-bytes: expected room for at least one state, got ${maxBytes} bytes for ${attempt.site.signals.length} signals and a ` +
      `horizon of ${attempt.site.horizon} ticks, ${free < 0 ? -free : 1} too few. ` +
      (isHopeless
        ? `Even the largest limit of ${MAX_BUNDLE_BYTES} would not do: ${fewer}.`
        : `Raise the limit, ${fewer}.`),
  );
}

function sectionsOf({ taught }: Attempt, learned: Learned, size: Size): KindSections {
  const { decays, resonators, lags, hasLevel } = taught.choice.bank;
  const level = hasLevel === true ? { level: true as const } : {};
  const { tensors } = roundedFactors(learned, size);
  return { kind: 'linear', ...roundSection(taught.round), linear: { decays, resonators, lags, ...level, ...tensors } };
}

/**
 * The round as a document holds it, for kinds that build on the linear one.
 *
 * shapes  weight (ny)
 * units   ticks
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function roundSection(round: Round | null): Pick<KindSections, 'round'> {
  return round === null ? {} : { round: { ticks: round.ticks, weight: Array.from(round.weight) } };
}

/**
 * The linear candidate of a size.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    two factorisations
 */
export function linearOfSize(attempt: Attempt, learned: Learned, size: Size): Candidate {
  const { around, taught, prepared } = attempt;
  const { order, basisCount, hasOwn } = size;
  const open = openCalibration(around.scalings.length, around.signalCount * around.horizon);
  return {
    kind: 'linear',
    name: `${hasOwn ? 'own part and ' : ''}${order} ${order === 1 ? 'state' : 'states'}, ${basisCount} curves, bank of ${bankName(taught.choice.bank)}`,
    float: floatModel(floatFactors(learned, size), around, open),
    rounded: floatModel(roundedFactors(learned, size).factors, around, open),
    sections: sectionsOf(attempt, learned, size),
    settled: {
      ownPenalty: [...new Set(taught.choice.ownPenalty)],
      crossPenalty: [...new Set(taught.choice.crossPenalty)],
      order,
      basis: basisCount,
      own: hasOwn,
    },
    again(ticks) {
      const more = teachAgain(prepared, taught, ticks);
      const { carried } = (hasOwn ? more.apart : more).bottleneck;
      return linearOfSize(attempt, more, { ...size, order: Math.min(order, carried.length) });
    },
  };
}
