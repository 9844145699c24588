/**
 * What a model must be before anything is computed with it: shapes that agree, finite numbers, a bank that forgets.
 * Checked once, at the door, so that the kernels need no checks.
 */
import { FilterError } from './errors.ts';
import type { LinearModel } from './model.ts';

/** Largest size of a weight: three products of weights and clipped features then stay far below the float64 range. */
const WEIGHT_LIMIT = 1e60;
/** Largest size of a mean, a clip or a lattice offset, in units of the signal. */
const UNIT_LIMIT = 1e15;

/**
 * Refuses a model whose parts disagree or that could leave the finite numbers.
 *
 * shapes  as LinearModel states
 * throws  FilterError 'model', naming the part, what was expected and what was found
 */
export function checkModel(model: LinearModel): void {
  checkCounts(model);
  checkShapes(model);
  checkBank(model);
  checkChannels(model);
  for (const name of ['bottleneck', 'readout', 'horizonBasis', 'seasonal'] as const) {
    each(
      model[name],
      name,
      (value) => Math.abs(value) <= WEIGHT_LIMIT,
      `a finite number, at most ${WEIGHT_LIMIT} in size`,
    );
  }
  each(model.radius, 'radius', (value) => value >= 0 && value <= WEIGHT_LIMIT, 'a finite number, zero or more');
  require(model.coverage > 0 && model.coverage < 1, 'coverage', 'more than 0 and less than 1', model.coverage);
  require(model.boundsRate >= 0 && model.boundsRate <= 0.5, 'boundsRate', '0 to 0.5', model.boundsRate);
  require(model.rejectSd > 0 && model.rejectSd <= WEIGHT_LIMIT, 'rejectSd', 'a finite number above 0', model.rejectSd);
}

function checkCounts(model: LinearModel): void {
  const whole = (name: keyof LinearModel, low: number, high: number): void => {
    const value = model[name] as number;
    require(Number.isInteger(value) && value >= low && value <= high, name, `a whole number ${low} to ${high}`, value);
  };
  whole('signalCount', 1, 4096);
  whole('channelCount', model.signalCount, 4096);
  whole('order', 1, 4096);
  whole('basisCount', 1, 4096);
  whole('horizon', 1, 10_000);
  whole('seasonalPeriod', 0, 1e9);
  whole('seasonalBins', 1, 1e6);
  whole('rejectMaxTicks', 0, 10_000);
  whole('warmupTicks', 0, 1e9);
  require(model.tickMs > 0 && Number.isFinite(model.tickMs), 'tickMs', 'a finite number above 0', model.tickMs);
}

function checkShapes(model: LinearModel): void {
  const nc = model.channelCount;
  const ny = model.signalCount;
  const { decays, resonatorRe, resonatorIm, lags, featureCount, order, basisCount, horizon } = model;
  const shape = (name: keyof LinearModel, expected: number): void => {
    const got = (model[name] as Float64Array).length;
    require(got === expected, name, `${expected} numbers`, `${got} numbers`);
  };
  shape('resonatorIm', resonatorRe.length);
  const features = decays.length + resonatorRe.length + resonatorIm.length + lags.length;
  require(features === featureCount &&
    features > 0, 'featureCount', `decays + 2 × resonators + lags = ${features}, above 0`, featureCount);
  shape('featureScale', nc * featureCount);
  shape('bottleneck', order * nc * featureCount);
  shape('readout', ny * basisCount * order);
  shape('horizonBasis', horizon * basisCount);
  for (const name of [
    'mean',
    'scale',
    'latticeStep',
    'latticeOffset',
    'clipLow',
    'clipHigh',
    'residualScale',
  ] as const) {
    shape(name, nc);
  }
  shape('seasonal', ny * model.seasonalBins);
  shape('radius', ny * horizon);
}

function checkBank(model: LinearModel): void {
  each(model.decays, 'decays', (value) => value > 0 && value < 1, 'more than 0 and less than 1');
  for (let k = 0; k < model.resonatorRe.length; k++) {
    const modulus = Math.sqrt(
      model.resonatorRe[k] * model.resonatorRe[k] + model.resonatorIm[k] * model.resonatorIm[k],
    );
    require(modulus < 1, `resonators[${k}]`, 'a modulus less than 1', modulus);
  }
  for (let k = 0; k < model.lags.length; k++) {
    const least = k === 0 ? 1 : model.lags[k - 1] + 1;
    require(model.lags[k] >= least && model.lags[k] <= 1e6, `lags[${k}]`, `ascending, ${least} to 1000000`, model.lags[
      k
    ]);
  }
  each(model.featureScale, 'featureScale', (value) => value > 0 && value <= WEIGHT_LIMIT, 'a finite number above 0');
}

function checkChannels(model: LinearModel): void {
  for (const name of ['mean', 'latticeOffset', 'clipLow', 'clipHigh'] as const) {
    each(model[name], name, (value) => Math.abs(value) <= UNIT_LIMIT, `a finite number, at most ${UNIT_LIMIT} in size`);
  }
  for (const name of ['scale', 'latticeStep', 'residualScale'] as const) {
    each(model[name], name, (value) => value >= 1e-30 && value <= UNIT_LIMIT, `1e-30 to ${UNIT_LIMIT}`);
  }
  for (let c = 0; c < model.channelCount; c++) {
    require(model.clipLow[c] < model.clipHigh[c], `clipHigh[${c}]`, `more than clipLow, ${model.clipLow[c]}`, model
      .clipHigh[c]);
  }
}

function each(values: Float64Array, name: string, isGood: (value: number) => boolean, expected: string): void {
  for (let k = 0; k < values.length; k++) require(isGood(values[k]), `${name}[${k}]`, expected, values[k]);
}

function require(holds: boolean, field: string, expected: string, got: unknown): void {
  if (holds) return;
  throw new FilterError('model', `model ${field}: expected ${expected}, got ${got}; fit the bundle again`, {
    details: { field, expected, got },
  });
}
