/**
 * From fitted members to a driven model and its section of the bundle: all matrices int16, since the recursion runs through
 * them and there are few numbers; features by their seed.
 */
import { type DrivenTensors, dequantise, quantiseTensor, type Tensor } from '@stillwell/protocol';
import { type DrivenModel, memberFeatures } from '@stillwell/runtime/filter';
import { commonPart, openCalibration, type Surroundings } from '../quantise/float-model.ts';
import type { Member, SensorRange, Setting } from './ensemble.ts';
import type { FadingTimes } from './fading.ts';
import { parameterLayout } from './free-run.ts';

/** Everything a driven model is made of. */
export interface DrivenParts {
  readonly setting: Setting;
  /** Of the first member's features; the next member has the next seed. */
  readonly seed: number;
  readonly members: readonly Member[];
  readonly range: SensorRange;
  /** (members · hidden × (nc + 1)) */
  readonly start: Float64Array;
  readonly times: FadingTimes;
  /** (ny·J × (1 + K)) */
  readonly deviationGain: Float64Array;
  /** (nu·J × (1 + K)) */
  readonly inputGain: Float64Array;
  readonly settleTicks: number;
}

/** A matrix of the section: its values and its shape. */
interface Matrix {
  readonly values: Float64Array;
  readonly rows: number;
  readonly cols: number;
}

/**
 * The section of the bundle.
 *
 * shapes  as DrivenTensors
 * units   standardised
 * throws  ProtocolError 'tensor' if a number is not finite
 * source  file head
 * cost    one rounding
 */
export function drivenSection(parts: DrivenParts): DrivenTensors {
  const { linear, gain, start, deviation, inputs } = matricesOf(parts);
  const { setting, range, times } = parts;
  return {
    seed: parts.seed,
    width: setting.width,
    members: parts.members.length,
    hidden: setting.hiddenCount,
    features: setting.featureCount,
    linear: tensorOf(linear),
    gain: tensorOf(gain),
    start: tensorOf(start),
    sensor: Array.from(range.low, (low, i) => [low, range.high[i]] as const),
    fadeDecays: Array.from(times.fadeDecays),
    meanDecays: Array.from(times.meanDecays),
    deviation: tensorOf(deviation),
    inputs: tensorOf(inputs),
    settleTicks: parts.settleTicks,
  };
}

/**
 * The model, rounded as in the section or not at all; guard open, bounds of no width.
 *
 * shapes  as DrivenModel
 * units   standardised
 * throws  ProtocolError 'tensor' if a number is not finite
 * source  file head
 * cost    one draw of the features
 */
export function drivenModel(parts: DrivenParts, around: Surroundings, isRounded: boolean): DrivenModel {
  const { setting, range, times, members } = parts;
  const { linear, gain, start, deviation, inputs } = matricesOf(parts);
  const value = (matrix: Matrix): Float64Array => (isRounded ? dequantise(tensorOf(matrix)) : matrix.values);
  const nc = around.scalings.length;
  const states = around.signalCount + setting.hiddenCount;
  return {
    kind: 'driven',
    ...commonPart(around, openCalibration(nc, around.signalCount * around.horizon)),
    order: members.length * states,
    memberCount: members.length,
    hiddenCount: setting.hiddenCount,
    randomCount: setting.featureCount,
    linear: value(linear),
    featureGain: value(gain),
    ...memberFeatures(
      parts.seed,
      members.length,
      setting.featureCount,
      states + nc - around.signalCount,
      setting.width,
    ),
    start: value(start),
    outputLow: range.low,
    outputHigh: range.high,
    fadeDecays: times.fadeDecays,
    meanDecays: times.meanDecays,
    deviationGain: value(deviation),
    inputGain: value(inputs),
    settleTicks: parts.settleTicks,
  };
}

function tensorOf({ values, rows, cols }: Matrix): Tensor {
  return quantiseTensor(values, rows, cols, 'i16');
}

function matricesOf(
  parts: DrivenParts,
): Readonly<Record<'linear' | 'gain' | 'start' | 'deviation' | 'inputs', Matrix>> {
  const { members, times } = parts;
  const { shape } = members[0];
  const { states, width, gainAt, startAt } = parameterLayout(shape);
  const nc = shape.signalCount + shape.inputCount;
  const J = times.fadeDecays.length;
  const K = times.meanDecays.length;
  const size = Math.sqrt(2 / shape.featureCount);
  const joined = (pick: (member: Member) => Float64Array): Float64Array =>
    Float64Array.from(members.flatMap((member) => Array.from(pick(member))));
  const matrix = (values: Float64Array, rows: number, cols: number): Matrix => ({ values, rows, cols });
  return {
    linear: matrix(
      joined(({ parameters }) => parameters.subarray(0, gainAt)),
      members.length * states,
      width,
    ),
    gain: matrix(
      joined(({ parameters }) => parameters.subarray(gainAt, startAt).map((value) => value * size)),
      members.length * states,
      shape.featureCount,
    ),
    start: matrix(parts.start, members.length * shape.hiddenCount, nc + 1),
    deviation: matrix(parts.deviationGain, shape.signalCount * J, 1 + K),
    inputs: matrix(parts.inputGain, shape.inputCount * J, 1 + K),
  };
}
