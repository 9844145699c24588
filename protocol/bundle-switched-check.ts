/** Whether the fields of the switched section agree with each other and with the bundle around it. */
import type { SwitchedTensors } from './bundle-switched.ts';
import { ProtocolError } from './errors.ts';
import { checkTensor, type Tensor, type TensorType } from './tensor.ts';

const QUANTISED: readonly TensorType[] = ['i8', 'i16'];
const SINGLE: readonly TensorType[] = ['f32'];

const refuse = (path: string, what: string): never => {
  throw new ProtocolError('schema', `bundle document: ${path}: ${what}`, { details: { path } });
};

/** What the section is held against. */
export interface AroundSwitched {
  readonly channels: number;
  readonly signals: number;
  readonly horizon: number;
}

const checkRising = (list: readonly number[], end: number, path: string): void => {
  if (list.length === 0) refuse(path, 'expected at least one signal, got none');
  for (const [k, value] of list.entries()) {
    const least = k === 0 ? 0 : list[k - 1]! + 1;
    if (value < least || value >= end) refuse(`${path}[${k}]`, `expected ${least} to ${end - 1}, rising, got ${value}`);
  }
};

/**
 * Refuses a section whose fields disagree.
 *
 * shapes  as SwitchedTensors states
 * throws  ProtocolError 'schema' naming the field, 'tensor' naming the tensor; expected and got
 */
export const checkSwitched = (section: SwitchedTensors, around: AroundSwitched): void => {
  const { modes: M, discrete, driven, forecast, pairs, decays, outlookBasis, season, correction } = section;
  const { channels, signals, horizon: H } = around;
  checkRising(discrete, signals, 'switched.discrete');
  checkRising(driven, signals, 'switched.driven');
  checkRising(forecast, signals, 'switched.forecast');
  const ours = [...discrete, ...driven];
  if (new Set(ours).size < ours.length)
    refuse('switched.driven', 'expected signals that are not near-discrete, got one');
  const stranger = forecast.find((signal) => !ours.includes(signal));
  if (stranger !== undefined) refuse('switched.forecast', `expected driven or near-discrete signals, got ${stranger}`);
  for (const [p, [from, to]] of pairs.entries()) {
    if (from < M && to < M && from !== to) continue;
    refuse(`switched.pairs[${p}]`, `expected two modes below ${M}, got ${from} and ${to}`);
  }
  const [n, k, P] = [driven.length, discrete.length, pairs.length];
  const F = n * decays.length + (channels - signals) * (decays.length + 1);
  const r = outlookBasis.cols;
  if (r === 0) refuse('switched.outlookBasis', 'expected at least one column, got none');
  if (season.cols === 0) refuse('switched.season', 'expected at least one column, got none');
  const shapes: readonly (readonly [string, Tensor, number, number, readonly TensorType[]])[] = [
    ['share', section.share, forecast.length, H, QUANTISED],
    ['centre', section.centre, M, k, SINGLE],
    ['spread', section.spread, 1, k, SINGLE],
    ['slope', section.slope, M * k, n, SINGLE],
    ['drift', section.drift, M, n, SINGLE],
    ['coupling', section.coupling, M * n, n, SINGLE],
    ['landing', section.landing, P * n, 1 + n, SINGLE],
    ['hazard', section.hazard, P, 2 + n, SINGLE],
    ['limit', section.limit, 1, n, SINGLE],
    ['floodFrom', section.floodFrom, 1, n, SINGLE],
    ['stops', section.stops, 3, n, SINGLE],
    ['featureScale', section.featureScale, 1, F, SINGLE],
    ['outlook', section.outlook, n * r, 2 * F, QUANTISED],
    ['outlookBasis', outlookBasis, H, r, QUANTISED],
    ['season', season, n, season.cols, QUANTISED],
    ['doubt', section.doubt, 2 * n, H, QUANTISED],
    ['doubtScale', section.doubtScale, n, 1 + F, SINGLE],
  ];
  for (const [name, tensor, rows, cols, types] of shapes) checkTensor(tensor, rows, cols, types, `switched.${name}`);
  if (correction === undefined) return;
  const { count, readout, basis, limit } = correction;
  const c = basis.cols;
  if (c === 0) refuse('switched.correction.basis', 'expected at least one column, got none');
  const width = count + 2 + 2 * n + M + F;
  checkTensor(readout, forecast.length * c, width, QUANTISED, 'switched.correction.readout');
  checkTensor(basis, H, c, QUANTISED, 'switched.correction.basis');
  checkTensor(limit, 1, forecast.length, SINGLE, 'switched.correction.limit');
};
