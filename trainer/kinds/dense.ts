/**
 * The dense kind as a candidate: the bank with its learned map, reduced to a recursion of few numbers. At the same bytes it
 * carries more of the map than a bottleneck does, since a state costs one number a channel instead of one a feature.
 */
import type { DenseModel } from '@stillwell/runtime/filter';
import { chooseDenseSize, type DenseSize, type JudgedPart } from '../dense/size.ts';
import { denseTarget } from '../dense/target.ts';
import { TrainError } from '../errors.ts';
import { settlingTicks } from '../identify/bank.ts';
import { usableBlocks } from '../identify/blocks.ts';
import type { Prepared } from '../identify/prepare.ts';
import { balance, type Reduced, reduce, reduceUpTo } from '../identify/reduce.ts';
import { completedHistory, type Taught, teachAgain } from '../identify/teach.ts';
import { type DenseFactors, type DenseTarget, denseBytes, floatDense, roundedDense } from '../quantise/dense.ts';
import { commonPart, openCalibration } from '../quantise/float-model.ts';
import type { Learned } from '../quantise/quantise.ts';
import type { Attempt, Candidate, KindSections } from './candidate.ts';
import { roundSection } from './linear.ts';

/** Rounds of trying a smaller size until the document fits. */
const MOST_ROUNDS = 4;
/** Improvements of the reduction at the size chosen; beyond these little moved on the records met. */
const IMPROVEMENTS = 4;

/**
 * The dense candidate; null where the map has no modal reduction, or not one state fits the bytes.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    a dozen reductions
 */
export function tryDense(attempt: Attempt): Candidate | null {
  const { prepared, taught } = attempt;
  const { learnTicks, calibrateTicks, around } = prepared;
  const target = targetOf(prepared, taught, taught.learned, learnTicks);
  const balanced = balance(target.input, target.map, target.layout);
  const reductions = new Map<number, Reduced | null>();
  const cut = (order: number): Reduced | null => {
    const known = reductions.get(order);
    if (known !== undefined) return known;
    const reduced = reduce(balanced, order, 0);
    reductions.set(order, reduced);
    return reduced;
  };
  const end = learnTicks + calibrateTicks;
  const { values, inLongGap } = completedHistory(prepared, { ...taught, passing: null }, end);
  const judged: JudgedPart = { values, blocks: usableBlocks(learnTicks, end, around.horizon, inLongGap) };
  const least = reduceUpTo(balanced, 1, 0);
  if (least === null) return null;
  const free = attempt.bytesLeft(sectionsOf(attempt, target, least, 1));
  let tensorBytes = free + denseBytes(target, 1, 1);
  for (let round = 0; free >= 0 && round < MOST_ROUNDS; round++) {
    const size = chooseDenseSize(target, balanced, cut, judged, tensorBytes);
    const reduced = size === null ? null : reduceUpTo(balanced, size.order, IMPROVEMENTS);
    if (size === null || reduced === null) return null;
    const left = attempt.bytesLeft(sectionsOf(attempt, target, reduced, size.basisCount));
    if (left >= 0) return candidateOf(attempt, target, reduced, size);
    tensorBytes += left;
  }
  return null;
}

function targetOf(prepared: Prepared, taught: Taught, learned: Learned, ticks: number): DenseTarget {
  const { bank } = taught.choice;
  const settle = (taught.round?.ticks ?? 0) + Math.min(settlingTicks(bank), Math.floor(ticks / 8));
  const { values, inLongGap } = completedHistory(prepared, taught, ticks);
  return denseTarget(learned, bank, values, usableBlocks(settle, ticks, prepared.around.horizon, inLongGap));
}

function sectionsOf(
  { taught }: Attempt,
  target: DenseTarget,
  { recursion }: Reduced,
  basisCount: number,
): KindSections {
  return { kind: 'dense', ...roundSection(taught.round), dense: roundedDense(target, recursion, basisCount).tensors };
}

function candidateOf(attempt: Attempt, target: DenseTarget, reduced: Reduced, size: DenseSize): Candidate {
  const { prepared, taught } = attempt;
  const { basisCount } = size;
  const order = reduced.recursion.modes.size;
  const model = (factors: DenseFactors): DenseModel => {
    const { scalings, signalCount, horizon } = attempt.around;
    const open = openCalibration(scalings.length, signalCount * horizon);
    const { round } = taught;
    return { kind: 'dense', ...commonPart(attempt.around, open), ...(round === null ? {} : { round }), ...factors };
  };
  return {
    kind: 'dense',
    name: `${order} states, ${basisCount} curves, reduced from a bank of ${target.input.bank.recursion.modes.size} features`,
    float: model(floatDense(target, reduced.recursion, basisCount)),
    rounded: model(roundedDense(target, reduced.recursion, basisCount).factors),
    sections: sectionsOf(attempt, target, reduced, basisCount),
    settled: { order, basis: basisCount },
    again(ticks) {
      const more = targetOf(prepared, taught, teachAgain(prepared, taught, ticks), ticks);
      const next = reduceUpTo(balance(more.input, more.map, more.layout), order, IMPROVEMENTS);
      if (next === null)
        throw new TrainError(
          'fit',
          'Learned from every tick, the dense kind found no recursion to reduce to. Try --kind linear.',
        );
      return candidateOf(attempt, more, next, size);
    },
  };
}
