/**
 * The featured kind as a candidate: the linear kind with fewer states, and a correction by random features in the bytes so
 * saved. Learned from what the rounded linear map leaves over, so that the features mend its rounding too.
 */
import { dequantise, type FeatureTensors, quantiseTensor } from '@stillwell/protocol';
import { type FeaturedModel, type LinearModel, scaledFeatures } from '@stillwell/runtime/filter';
import type { Attempt, Candidate } from '../kinds/candidate.ts';
import { linearOfSize, tryLinear } from '../kinds/linear.ts';
import { chooseFeatures, type FeatureChoice, TRIAL_ORIGINS } from './choose-features.ts';
import { type Correction, correctionError, reduceMap, ridgeFeatures, roundingOf } from './correction.ts';
import { type FeatureMap, type FeatureMoments, gatherFeatures } from './feature-moments.ts';
import { gatherOrigins, MOST_ORIGINS, type Origins, onModelCurves } from './origins.ts';

/** Share of the bytes kept for the correction. */
const CORRECTION_SHARE = 0.5;
/** Fewer origins than this teach a few dozen features nothing. */
const LEAST_ORIGINS = 300;
/** States of the linear part where its own choice would have been another form. */
const MOST_STATES = 24;
const MOST_DIRECTIONS = 24;
/** Heavier penalties than the chosen one that rounding may call for. */
const PENALTIES_UP = [1, 10, 100] as const;

/**
 * The featured candidate; null where random features do not surely gain on the linear map.
 *
 * shapes  as Candidate
 * units   standardised
 * throws  TrainError 'fit' from the linear kind and the solves
 * source  random features: Rahimi and Recht (2007)
 * cost    a replay of the record, and some ten passes of few features; where those gain, about a dozen of more
 */
export function tryFeatured(attempt: Attempt): Candidate | null {
  const { prepared } = attempt;
  const least = linearOfSize(attempt, attempt.taught.learned, { order: 1, basisCount: 1, hasOwn: false });
  const free = attempt.bytesLeft(least.sections);
  const reserve = Math.floor(CORRECTION_SHARE * free);
  const plain = linearPart(attempt, reserve);
  const model = plain.rounded as LinearModel;
  const ticks = prepared.learnTicks + prepared.calibrateTicks;
  const origins = originsOf(attempt, model, ticks, TRIAL_ORIGINS);
  if (origins.at.length < LEAST_ORIGINS) return null;
  const most = Math.floor(reserve / 4);
  const choice = chooseFeatures(origins, {
    seed: attempt.options.seed,
    horizon: model.horizon,
    mostFeatures: most,
    carried: attempt.taught.learned.bottleneck.carried,
  });
  if (choice === null) return null;
  return candidateOf(attempt, plain, choice, prepared.learnTicks);
}

function originsOf({ prepared }: Attempt, model: LinearModel, ticks: number, most = MOST_ORIGINS): Origins {
  return gatherOrigins(model, prepared.calm, prepared.filled, { fromTick: 0, toTick: ticks }, most);
}

function candidateOf(attempt: Attempt, plain: Candidate, choice: FeatureChoice, ticks: number): Candidate | null {
  const { setting, penalty } = choice;
  const rounded = plain.rounded as LinearModel;
  const origins = originsOf(attempt, rounded, ticks);
  const moments = gatherFeatures(origins, setting, 0, origins.at.length);
  const maps = PENALTIES_UP.map((factor) => ridgeFeatures(moments, factor * penalty));
  const rounding = roundingOf(moments);
  for (let most = MOST_DIRECTIONS; most >= 1; ) {
    const correction = leastRounded(moments, maps, most, rounding);
    const section = sectionOf(choice, correction, readoutOf(correction, origins, rounded));
    const sections = { ...plain.sections, kind: 'featured' as const, features: section };
    const left = attempt.bytesLeft(sections);
    if (left < 0) {
      most = Math.min(correction.count - 1, Math.floor(correction.count + left / setting.count));
      continue;
    }
    let float: FeaturedModel | null = null;
    return {
      kind: 'featured',
      name: `${plain.name}; ${correction.count} corrections from ${setting.count} random features of ${setting.scale.length} numbers`,
      // Made when asked for: it takes as long as all the rest, and only the kind chosen is held against it.
      get float() {
        float ??= floatOf(attempt, plain.float as LinearModel, choice, ticks, correction.count);
        return float;
      },
      rounded: modelOf(rounded, choice, correction, dequantise(section.readout)),
      sections,
      settled: settledOf(choice, rounded),
      again: (more) => {
        const again = plain.again(more);
        return candidateOf(attempt, again, choice, more) ?? again;
      },
    };
  }
  return null;
}

/** Of maps under rising penalties the one that errs least once rounded: a light penalty's large weights may round badly. */
function leastRounded(
  moments: FeatureMoments,
  maps: readonly FeatureMap[],
  most: number,
  rounding: Float64Array,
): Correction {
  const tried = maps.map((map) => reduceMap(moments, map, most, rounding));
  const errors = tried.map((correction) => correctionError(moments, correction));
  return tried[errors.indexOf(Math.min(...errors))];
}

/** The same without rounding, learned from what the linear part without rounding leaves over. */
function floatOf(
  attempt: Attempt,
  linear: LinearModel,
  { setting, penalty }: FeatureChoice,
  ticks: number,
  count: number,
): FeaturedModel {
  const origins = originsOf(attempt, linear, ticks);
  const moments = gatherFeatures(origins, setting, 0, origins.at.length);
  const exact = reduceMap(moments, ridgeFeatures(moments, penalty), count, null);
  return modelOf(linear, { setting, penalty }, exact, readoutOf(exact, origins, linear));
}

function settledOf({ setting, penalty }: FeatureChoice, model: LinearModel): Readonly<Record<string, unknown>> {
  const { count: features, states, lags } = setting;
  return { order: model.order, basis: model.basisCount, features, states, lags, penalty };
}

/** (ny·r × k) from the directions to each signal's coefficients on the model's curves. */
function readoutOf({ readout, count }: Correction, { curves }: Origins, model: LinearModel): Float64Array {
  const { signalCount: ny, basisCount: r } = model;
  const out = new Float64Array(ny * r * count);
  for (let i = 0; i < ny; i++) {
    const rows = readout.slice(i * r * count, (i + 1) * r * count);
    out.set(onModelCurves(rows, curves[i], r, count), i * r * count);
  }
  return out;
}

function sectionOf({ setting }: FeatureChoice, correction: Correction, readout: Float64Array): FeatureTensors {
  const { projection, offset } = correction.tensors as NonNullable<Correction['tensors']>;
  return {
    seed: setting.seed,
    count: setting.count,
    states: setting.states,
    channels: setting.channels,
    lags: setting.lags,
    scale: setting.scale,
    projection,
    offset,
    readout: quantiseTensor(readout, readout.length / correction.count, correction.count, 'i8'),
  };
}

function modelOf(
  linear: LinearModel,
  { setting }: FeatureChoice,
  correction: Correction,
  readout: Float64Array,
): FeaturedModel {
  return {
    ...linear,
    kind: 'featured',
    summaryStates: setting.states,
    summaryChannels: Int32Array.from(setting.channels),
    summaryLags: Int32Array.from(setting.lags),
    randomCount: setting.count,
    ...scaledFeatures(setting.seed, setting.count, setting.scale),
    correctionCount: correction.count,
    projection: correction.projection,
    offset: correction.offset,
    correctionReadout: readout,
  };
}

/**
 * The linear part: as many states as leave the correction its bytes, all in the joint state, since that is what the features
 * see.
 */
function linearPart(attempt: Attempt, reserve: number): Candidate {
  const plain = tryLinear({ ...attempt, bytesLeft: (sections) => attempt.bytesLeft(sections) - reserve });
  const { own, basis } = plain.settled;
  if (own !== true) return plain;
  const { learned } = attempt.taught;
  const size = {
    order: Math.min(MOST_STATES, learned.bottleneck.carried.length),
    basisCount: Number(basis),
    hasOwn: false,
  };
  for (; size.order > 1; size.order--) {
    const candidate = linearOfSize(attempt, learned, size);
    if (attempt.bytesLeft(candidate.sections) >= reserve) return candidate;
  }
  return linearOfSize(attempt, learned, size);
}
