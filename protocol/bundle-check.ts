/**
 * Whether the fields of a bundle agree with each other: shapes of every tensor, order of channels and lags, moduli below
 * one. A bundle that passes computes without reading past an array and without growing for ever.
 */
import type {
  AgreementTensors,
  Bundle,
  BundleChannel,
  BundleKind,
  DenseTensors,
  LinearTensors,
  ResponseTensors,
  RoundPart,
} from './bundle.ts';
import { checkDriven, checkFeatures } from './bundle-features-check.ts';
import { checkSwitched } from './bundle-switched-check.ts';
import { toHex } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { bundleSchemaHash } from './schema-hash.ts';
import { checkTensor, dequantise, type TensorType } from './tensor.ts';

const QUANTISED: readonly TensorType[] = ['i8', 'i16'];
const FLOATS: readonly TensorType[] = ['f32', 'f64'];

const refuse = (path: string, what: string): never => {
  throw new ProtocolError('schema', `bundle document: ${path}: ${what}`, { details: { path } });
};

const checkLimits = (channel: BundleChannel, path: string): void => {
  const { lowLow, low, high, highHigh } = channel.limits;
  const ladder = [lowLow, low, high, highHigh].filter((value) => value !== null);
  const isRising = ladder.every((value, i) => i === 0 || value > ladder[i - 1]!);
  if (!isRising)
    refuse(`${path}.limits`, `expected levels that rise from lowLow to highHigh, got ${ladder.join(', ')}`);
};

const checkChannels = (channels: readonly BundleChannel[]): number => {
  const names = new Set<string>();
  let signals = 0;
  for (const [i, channel] of channels.entries()) {
    const path = `channels[${i}]`;
    if (names.has(channel.name)) refuse(`${path}.name`, `expected a name of its own, got "${channel.name}" again`);
    names.add(channel.name);
    if (channel.role === 'signal') {
      if (signals !== i) refuse(`${path}.role`, 'expected signals before inputs, got a signal after an input');
      signals++;
    }
    const [low, high] = channel.clip;
    if (!(low < high)) refuse(`${path}.clip`, `expected low below high, got [${low}, ${high}]`);
    checkLimits(channel, path);
  }
  if (signals === 0) refuse('channels', 'expected at least one signal, got inputs only');
  return signals;
};

const SECTIONS = {
  linear: ['linear'],
  dense: ['dense'],
  featured: ['linear', 'features'],
  switched: ['linear', 'switched'],
  driven: ['driven'],
} as const satisfies Record<BundleKind, readonly (keyof Bundle)[]>;

/** Kinds whose own recursion sees what a round ago was, and a plan of the inputs: a section for it would count twice. */
const WITHOUT = { round: ['switched', 'driven'], response: ['driven'] } as const satisfies Partial<
  Record<keyof Bundle, readonly BundleKind[]>
>;

/** Sections each kind must have, and may not have. */
const checkSections = (bundle: Bundle): void => {
  const { kind } = bundle;
  const own: readonly (keyof Bundle)[] = SECTIONS[kind];
  for (const needed of own) {
    if (bundle[needed] === undefined) refuse(needed, `expected the tensors of kind "${kind}", got none`);
  }
  for (const section of new Set(Object.values(SECTIONS).flat())) {
    if (own.includes(section) || bundle[section] === undefined) continue;
    refuse(section, `expected nothing of the sort in a bundle of kind "${kind}", got a section of another kind`);
  }
  for (const [section, kinds] of Object.entries(WITHOUT) as [keyof typeof WITHOUT, readonly BundleKind[]][]) {
    if (!kinds.includes(kind) || bundle[section] === undefined) continue;
    refuse(section, `expected none in a bundle of kind "${kind}", got one`);
  }
};

const checkLinear = (bundle: Bundle, linear: LinearTensors, signals: number): void => {
  const { decays, resonators, lags, level, featureExponents, bottleneck, readout, own, horizonBasis } = linear;
  for (const [i, [re, im]] of resonators.entries()) {
    const modulus = Math.sqrt(re * re + im * im);
    if (!(modulus < 1)) refuse(`linear.resonators[${i}]`, `expected a modulus below 1, got ${modulus}`);
  }
  for (const [i, lag] of lags.entries()) {
    if (i > 0 && lag <= lags[i - 1]!) refuse(`linear.lags[${i}]`, `expected a lag above ${lags[i - 1]}, got ${lag}`);
  }
  const features = decays.length + 2 * resonators.length + (level === true ? 1 : 0) + lags.length;
  if (features === 0) refuse('linear', 'expected at least one feature a channel, got none');
  const order = bottleneck.rows;
  const basis = horizonBasis.cols;
  if (order === 0) refuse('linear.bottleneck', 'expected at least one row, got none');
  if (basis === 0) refuse('linear.horizonBasis', 'expected at least one column, got none');
  checkTensor(featureExponents, bundle.channels.length, features, ['i8'], 'linear.featureExponents');
  checkUnitScales(featureExponents.scales);
  checkTensor(bottleneck, order, bundle.channels.length * features, QUANTISED, 'linear.bottleneck');
  checkTensor(readout, signals * basis, order, QUANTISED, 'linear.readout');
  const ownWidth = (1 + bundle.channels.length - signals) * features;
  if (own !== undefined) checkTensor(own, signals * basis, ownWidth, QUANTISED, 'linear.own');
  checkTensor(horizonBasis, bundle.horizon, basis, QUANTISED, 'linear.horizonBasis');
};

const checkDense = (bundle: Bundle, dense: DenseTensors, signals: number): void => {
  const { pairs, poles, drive, level, readout, horizonBasis } = dense;
  const order = poles.cols;
  const basis = horizonBasis.cols;
  if (order === 0) refuse('dense.poles', 'expected at least one column, got none');
  if (basis === 0) refuse('dense.horizonBasis', 'expected at least one column, got none');
  if (2 * pairs > order) refuse('dense.pairs', `expected at most ${Math.floor(order / 2)}, got ${pairs}`);
  checkTensor(poles, 1, order, FLOATS, 'dense.poles');
  const values = dequantise(poles);
  for (let k = 0; k < order; k += k < 2 * pairs ? 2 : 1) {
    const im = k < 2 * pairs ? values[k + 1]! : 0;
    const modulus = Math.sqrt(values[k]! * values[k]! + im * im);
    if (!(modulus < 1)) refuse(`dense.poles, column ${k}`, `expected a modulus below 1, got ${modulus}`);
  }
  checkTensor(drive, order, bundle.channels.length, QUANTISED, 'dense.drive');
  const seen = order + (level === true ? bundle.channels.length : 0);
  checkTensor(readout, signals * basis, seen, QUANTISED, 'dense.readout');
  checkTensor(horizonBasis, bundle.horizon, basis, QUANTISED, 'dense.horizonBasis');
  checkLagged(bundle, dense, signals);
};

const checkLagged = (bundle: Bundle, { lags = [], lagged }: DenseTensors, signals: number): void => {
  for (const [i, lag] of lags.entries()) {
    if (i > 0 && lag <= lags[i - 1]!) refuse(`dense.lags[${i}]`, `expected a lag above ${lags[i - 1]}, got ${lag}`);
  }
  if (lags.length > 0 !== (lagged !== undefined))
    refuse(
      'dense.lagged',
      `expected it together with lags, got ${lags.length} lags and ${lagged === undefined ? 'no' : 'a'} tensor`,
    );
  if (lagged === undefined) return;
  const steps = lagged.rows / signals;
  if (!(Number.isInteger(steps) && steps >= 1 && steps <= bundle.horizon))
    refuse(
      'dense.lagged',
      `expected as many rows for each of ${signals} signals, up to the horizon, got ${lagged.rows}`,
    );
  checkTensor(lagged, lagged.rows, lags.length, QUANTISED, 'dense.lagged');
};

/** Shapes that follow from the section alone; the width of its readout follows from the kind and is the filter's to check. */
const checkRound = (bundle: Bundle, { ticks, weight }: RoundPart, signals: number): void => {
  if (ticks < bundle.horizon) refuse('round.ticks', `expected at least the horizon, ${bundle.horizon}, got ${ticks}`);
  if (weight.length !== signals) refuse('round.weight', `expected ${signals} numbers, got ${weight.length}`);
};

const checkResponse = (bundle: Bundle, response: ResponseTensors, signals: number): void => {
  const { inputs, decays, delay, gain, looks, readout, basis, surprise } = response;
  const planned = inputs.length;
  const rising = (values: readonly number[], name: string, most: number): void => {
    for (const [k, value] of values.entries()) {
      if (value <= most && (k === 0 || value > values[k - 1]!)) continue;
      refuse(`response.${name}[${k}]`, `expected rising numbers up to ${most}, got ${values.join(', ')}`);
    }
  };
  rising(inputs, 'inputs', bundle.channels.length - signals - 1);
  rising(looks, 'looks', bundle.horizon);
  for (const [name, list, length] of [
    ['delay', delay, signals * planned],
    ['surprise', surprise, planned],
  ] as const) {
    if (list.length !== length) refuse(`response.${name}`, `expected ${length} numbers, got ${list.length}`);
  }
  const late = delay.find((ticks) => ticks >= bundle.horizon);
  if (late !== undefined) refuse('response.delay', `expected ticks below the horizon, ${bundle.horizon}, got ${late}`);
  if (basis.rows === 0 || basis.rows % planned !== 0)
    refuse('response.basis', `expected as many rows for each of ${planned} inputs, got ${basis.rows}`);
  checkTensor(gain, signals, planned * (decays.length + 2), QUANTISED, 'response.gain');
  checkTensor(readout, basis.rows, readout.cols, QUANTISED, 'response.readout');
  checkTensor(basis, basis.rows, bundle.horizon, QUANTISED, 'response.basis');
};

/** Exponents are integers as they stand: a scale would change them. */
const checkUnitScales = (scales: Uint8Array): void => {
  const view = new DataView(scales.buffer, scales.byteOffset, scales.byteLength);
  for (let row = 0; row < scales.length / 4; row++) {
    const scale = view.getFloat32(row * 4, true);
    if (scale !== 1) refuse('linear.featureExponents', `row ${row}: expected scale 1, got ${scale}`);
  }
};

const checkAgreement = (bundle: Bundle, agreement: AgreementTensors, signals: number): void => {
  const { weights, offset, scale, limit } = agreement;
  for (const [name, list] of Object.entries({ offset, scale, limit })) {
    if (list.length !== signals)
      refuse(`agreement.${name}`, `expected ${signals} numbers, one a signal, got ${list.length}`);
  }
  checkTensor(weights, signals, bundle.channels.length, QUANTISED, 'agreement.weights');
};

const checkGuard = ({ guard }: Bundle, signals: number): void => {
  const { stuck, rests, stuckActs } = guard;
  if (stuck === undefined && rests === undefined && stuckActs === undefined) return;
  for (const [name, list] of Object.entries({ stuck, rests })) {
    if (list?.length !== signals)
      refuse(
        `guard.${name}`,
        `expected ${signals} entries, one a signal, got ${list === undefined ? 'none' : list.length}`,
      );
  }
  const short = (stuck ?? []).indexOf(1);
  if (short >= 0) refuse(`guard.stuck[${short}]`, 'expected 0 or at least 2, got 1');
};

const checkSeasonal = (bundle: Bundle, signals: number): void => {
  const { periodTicks, table } = bundle.seasonal;
  const most = Math.max(1, periodTicks);
  if (table.cols < 1 || table.cols > most) {
    refuse('seasonal.table', `expected 1 to ${most} columns for a period of ${periodTicks} ticks, got ${table.cols}`);
  }
  checkTensor(table, signals, table.cols, QUANTISED, 'seasonal.table');
};

const checkRadius = (bundle: Bundle, signals: number): void => {
  checkTensor(bundle.bounds.radius, signals, bundle.horizon, QUANTISED, 'bounds.radius');
  const values = dequantise(bundle.bounds.radius);
  const at = values.findIndex((value) => value < 0);
  if (at >= 0) refuse('bounds.radius', `element ${at}: expected a half-width >= 0, got ${values[at]}`);
  const { crossing = [], crossingBySignal } = bundle.bounds;
  checkRising(crossing, 'bounds.crossing');
  if (crossingBySignal === undefined) return;
  if (crossingBySignal.length !== signals) {
    refuse('bounds.crossingBySignal', `expected ${signals} entries, got ${crossingBySignal.length}`);
  }
  for (const [i, own] of crossingBySignal.entries()) {
    checkRising(own?.percent ?? [], `bounds.crossingBySignal[${i}].percent`);
    if (own !== null && own.high < own.low) {
      refuse(`bounds.crossingBySignal[${i}]`, `expected high not below low, got ${own.low} and ${own.high}`);
    }
  }
};

const checkRising = (shares: readonly number[], where: string): void => {
  const falls = shares.findIndex((share, k) => share < (shares[k - 1] ?? 0));
  if (falls >= 0) refuse(where, `element ${falls}: expected no less than the one before, got ${shares[falls]}`);
};

const checkJudge = (bundle: Bundle, signals: number): void => {
  const { horizons, rivals, mse, skill, coverage, verdicts } = bundle.judge;
  for (const [i, step] of horizons.entries()) {
    const least = i === 0 ? 0 : horizons[i - 1]!;
    if (step <= least || step > bundle.horizon) {
      refuse(`judge.horizons[${i}]`, `expected a step above ${least} and up to ${bundle.horizon}, got ${step}`);
    }
  }
  checkTensor(mse, signals, horizons.length, FLOATS, 'judge.mse');
  checkTensor(skill, signals * rivals.length, horizons.length, FLOATS, 'judge.skill');
  checkTensor(coverage, signals, horizons.length, FLOATS, 'judge.coverage');
  if (verdicts.length !== signals) {
    refuse('judge.verdicts', `expected ${signals} sentences, one a signal, got ${verdicts.length}`);
  }
};

/**
 * Refuses a bundle whose fields disagree.
 *
 * shapes  as the interfaces of bundle.ts state them
 * throws  ProtocolError 'schema' naming the field, 'tensor' naming the tensor; expected and got
 */
export const checkBundle = (bundle: Bundle): void => {
  const signals = checkChannels(bundle.channels);
  const expected = toHex(bundleSchemaHash(bundle));
  const got = toHex(bundle.schema);
  if (expected !== got) refuse('schema', `expected ${expected} for these channels and this tick, got ${got}`);
  checkSections(bundle);
  if (bundle.linear !== undefined) checkLinear(bundle, bundle.linear, signals);
  if (bundle.dense !== undefined) checkDense(bundle, bundle.dense, signals);
  const around = {
    channels: bundle.channels.length,
    signals,
    basis: bundle.linear?.horizonBasis.cols ?? 0,
    order: bundle.linear?.bottleneck.rows ?? 0,
  };
  if (bundle.features !== undefined) checkFeatures(bundle.features, around);
  if (bundle.switched !== undefined) checkSwitched(bundle.switched, { ...around, horizon: bundle.horizon });
  if (bundle.driven !== undefined) checkDriven(bundle.driven, around);
  if (bundle.response !== undefined) checkResponse(bundle, bundle.response, signals);
  if (bundle.round !== undefined) checkRound(bundle, bundle.round, signals);
  checkGuard(bundle, signals);
  if (bundle.agreement !== undefined) checkAgreement(bundle, bundle.agreement, signals);
  checkSeasonal(bundle, signals);
  checkRadius(bundle, signals);
  checkJudge(bundle, signals);
  const { last } = bundle.probe;
  if (last.length !== bundle.horizon) {
    refuse('probe.last', `expected ${bundle.horizon} numbers, one a step, got ${last.length}`);
  }
  const { firstMs, lastMs } = bundle.provenance;
  if (firstMs > lastMs) refuse('provenance.firstMs', `expected a time up to lastMs (${lastMs}), got ${firstMs}`);
};
