/**
 * Which kind of model a history gets: every kind that applies is replayed, as rounded, over the calibration part, which it
 * did not learn from, and the smallest that is as good as the best is taken.
 */
import { encode } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';
import { tryDriven } from '../featured/driven.ts';
import { tryFeatured } from '../featured/featured.ts';
import { plannerOf } from '../judge/plan-trial.ts';
import { signalErrors } from '../judge/replay-scores.ts';
import { learnPlans, plannedInputs } from '../plans.ts';
import { trySwitched } from '../switched/switched.ts';
import type { Attempt, Candidate, TryKind } from './candidate.ts';
import { tryDense } from './dense.ts';
import { tryLinear } from './linear.ts';

/** Kinds in the order in which they are tried. */
const KINDS: Readonly<Record<Model['kind'], TryKind>> = {
  linear: tryLinear,
  dense: tryDense,
  switched: trySwitched,
  featured: tryFeatured,
  driven: tryDriven,
};

/** A larger bundle is taken only for this gain in squared error, on geometric average over the signals. */
const TIE = 0.002;

/** A bundle with less than this share of its tensors left over was cut to fit. */
const TIGHT = 0.05;

/** Features are not tried, which takes long, where modes leave less than this share of the linear kind's squared error. */
const SERVED_BY_MODES = 0.5;

/** One kind's result, for people. */
export interface Tried {
  readonly kind: Model['kind'];
  readonly name: string;
  /** Of its sections, in the document. */
  readonly bytes: number;
  /** Geometric mean over signals of its squared error over the linear kind's, or the first tried, on the calibration part. */
  readonly error: number;
}

/** What was chosen, and what was tried. */
export interface KindChoice {
  readonly candidate: Candidate;
  readonly tried: readonly Tried[];
}

/**
 * Tries and chooses. `whenFirst` is told of the first candidate before others are tried: what it will need, if it is
 * chosen, can be begun beside.
 *
 * shapes  as Attempt
 * units   as Attempt
 * throws  TrainError 'options' if the kind asked for does not apply; 'fit' from the linear kind, or the one asked for
 * source  own choice
 * cost    one fit and one replay of the calibration part a kind
 */
export function chooseKind(attempt: Attempt, whenFirst: (candidate: Candidate) => void = () => {}): KindChoice {
  const { kind } = attempt.options;
  const kinds = kind === 'auto' ? (Object.keys(KINDS) as Model['kind'][]) : [kind];
  const candidates: Candidate[] = [];
  const errorsOf = rememberedErrors(attempt);
  const errorOf = (candidate: Candidate): number => ratio(errorsOf(candidate), errorsOf(candidates[0]));
  for (const one of kinds) {
    const [linear] = candidates;
    if (one === 'dense' && linear !== undefined && !isTight(attempt, linear)) continue;
    const switched = candidates.find((candidate) => candidate.kind === 'switched');
    if (one === 'featured' && switched !== undefined && errorOf(switched) < SERVED_BY_MODES) continue;
    const candidate = tryKind(attempt, one);
    if (candidate === null) continue;
    if (candidates.push(candidate) === 1 && kinds.length > 1) whenFirst(candidate);
  }
  if (candidates.length === 0) {
    throw new TrainError(
      'options',
      `--kind ${kind}: this history holds nothing that kind could use. Leave it to auto.`,
      {
        details: { kind },
      },
    );
  }
  const tried = candidates.map((candidate) => ({
    kind: candidate.kind,
    name: candidate.name,
    bytes: encode(candidate.sections).length,
    error: candidates.length === 1 ? 1 : errorOf(candidate),
  }));
  const least = Math.min(...tried.map(({ error }) => error));
  const good = tried.flatMap(({ error }, k) => (error <= least * (1 + TIE) ? [k] : []));
  const smallest = good.reduce((best, k) => (tried[k].bytes < tried[best].bytes ? k : best));
  return { candidate: candidates[smallest], tried };
}

/** A candidate's errors, replayed once. */
function rememberedErrors(attempt: Attempt): (candidate: Candidate) => Float64Array {
  const known = new Map<Candidate, Float64Array>();
  return (candidate) => {
    const errors = known.get(candidate) ?? calibrationErrors(attempt, candidate);
    known.set(candidate, errors);
    return errors;
  };
}

/** Beside the linear kind, one whose numbers do not allow a model does not apply; asked for by name it says so. */
function tryKind(attempt: Attempt, kind: Model['kind']): Candidate | null {
  try {
    return KINDS[kind](attempt);
  } catch (error) {
    const mayPass = attempt.options.kind === 'auto' && kind !== 'linear';
    if (mayPass && error instanceof TrainError && error.code === 'fit') return null;
    throw error;
  }
}

/** Whether the linear kind had to be cut to fit: only then can a recursion say more in the same bytes. */
function isTight(attempt: Attempt, linear: Candidate): boolean {
  return attempt.bytesLeft(linear.sections) < TIGHT * encode(linear.sections).length;
}

/**
 * Errors without a plan; where inputs have plans, the geometric mean of those and of the errors under a true plan, since the
 * model will be asked for both.
 */
function calibrationErrors(attempt: Attempt, candidate: Candidate): Float64Array {
  const { split, series, prepared, site } = attempt;
  const fromTick = split.calibrate.fromTick - series.firstTick;
  const toTick = split.calibrate.toTick - series.firstTick;
  const { rounded } = candidate;
  const without = signalErrors(rounded, prepared.calm, { fromTick, toTick });
  const planned = plannedInputs(site);
  if (planned.length === 0) return without;
  const { response } = learnPlans(candidate, prepared, prepared.learnTicks, planned);
  const model = response === null ? rounded : { ...rounded, response: response.model };
  const planner = plannerOf('perfect', model, prepared.calm, { fromTick, toTick }, planned);
  const under = signalErrors(model, prepared.calm, { fromTick, toTick }, { planner });
  return without.map((error, i) => Math.sqrt(error * under[i]));
}

/** Geometric mean of ours over theirs, over the signals where both say something. */
function ratio(ours: Float64Array, theirs: Float64Array): number {
  let sum = 0;
  let count = 0;
  ours.forEach((error, i) => {
    if (!(error > 0 && theirs[i] > 0)) return;
    sum += Math.log(error / theirs[i]);
    count++;
  });
  return count > 0 ? Math.exp(sum / count) : 1;
}
