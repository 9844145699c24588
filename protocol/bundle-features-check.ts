/** Whether the sections of the kinds with random features agree with the bundle around them. */
import type { DrivenTensors, FeatureTensors } from './bundle-features.ts';
import { ProtocolError } from './errors.ts';
import { checkTensor, type TensorType } from './tensor.ts';

const QUANTISED: readonly TensorType[] = ['i8', 'i16'];
const FLOATS: readonly TensorType[] = ['f32', 'f64'];

/** What a section is held against. */
export interface SectionAround {
  readonly channels: number;
  readonly signals: number;
  /** r; 0 where there is no linear section. */
  readonly basis: number;
  /** d; 0 likewise. */
  readonly order: number;
}

const refuse = (path: string, what: string): never => {
  throw new ProtocolError('schema', `bundle document: ${path}: ${what}`, { details: { path } });
};

/**
 * Refuses a section `features` that disagrees.
 *
 * shapes  as FeatureTensors
 * throws  ProtocolError 'schema' or 'tensor' naming the field, expected and got
 */
export const checkFeatures = (section: FeatureTensors, { channels, signals, basis, order }: SectionAround): void => {
  const { count, states, channels: values, lags, scale, projection, offset, readout } = section;
  if (states > order) refuse('features.states', `expected at most the ${order} states there are, got ${states}`);
  for (const [k, channel] of values.entries()) {
    const least = k === 0 ? 0 : values[k - 1]! + 1;
    if (channel < least || channel >= channels) {
      refuse(`features.channels[${k}]`, `expected a channel from ${least} to ${channels - 1}, got ${channel}`);
    }
  }
  for (const [k, lag] of lags.entries()) {
    if (k > 0 && lag <= lags[k - 1]!) refuse(`features.lags[${k}]`, `expected a lag above ${lags[k - 1]}, got ${lag}`);
  }
  const seen = states + values.length * (1 + lags.length);
  if (seen === 0) refuse('features.states', 'expected at least one state or channel, got none');
  if (scale.length !== seen) refuse('features.scale', `expected ${seen} numbers, got ${scale.length}`);
  const corrections = projection.rows;
  if (corrections === 0) refuse('features.projection', 'expected at least one row, got none');
  checkTensor(projection, corrections, order + count, QUANTISED, 'features.projection');
  checkTensor(offset, corrections, 1, FLOATS, 'features.offset');
  checkTensor(readout, signals * basis, corrections, QUANTISED, 'features.readout');
};

/**
 * Refuses a section `driven` that disagrees.
 *
 * shapes  as DrivenTensors
 * throws  ProtocolError 'schema' or 'tensor' naming the field, expected and got
 */
export const checkDriven = (section: DrivenTensors, { channels, signals }: SectionAround): void => {
  const { members, hidden, features, sensor, fadeDecays, meanDecays } = section;
  const inputs = channels - signals;
  if (inputs === 0) refuse('driven', 'expected at least one input among the channels, got none');
  const states = signals + hidden;
  checkTensor(section.linear, members * states, states + inputs + 1, QUANTISED, 'driven.linear');
  checkTensor(section.gain, members * states, features, QUANTISED, 'driven.gain');
  checkTensor(section.start, members * hidden, channels + 1, QUANTISED, 'driven.start');
  const [fades, means] = [fadeDecays.length, meanDecays.length];
  checkTensor(section.deviation, signals * fades, 1 + means, QUANTISED, 'driven.deviation');
  checkTensor(section.inputs, inputs * fades, 1 + means, QUANTISED, 'driven.inputs');
  if (sensor.length !== signals) refuse('driven.sensor', `expected ${signals} pairs, got ${sensor.length}`);
  for (const [i, [low, high]] of sensor.entries()) {
    if (!(low < high)) refuse(`driven.sensor[${i}]`, `expected low below high, got [${low}, ${high}]`);
  }
};
