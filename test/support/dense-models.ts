/** Dense bundles and models for tests, around the same channels and calibration as the synthetic linear ones. Not fitted. */
import { type Bundle, quantiseTensor } from '@stillwell/protocol';
import { type DenseModel, modelFromBundle } from '@stillwell/runtime/filter';
import { type ModelChoice, seededNumbers, syntheticBundle } from './models.ts';

/** What may be chosen beside `ModelChoice`. */
export interface DenseChoice extends ModelChoice {
  /** Complex poles; the rest of the order are real. */
  readonly pairs?: number;
  /** Steps that lags add to. */
  readonly lagSteps?: number;
}

/** A bundle of the dense kind. */
export function syntheticDenseBundle(choice: DenseChoice = {}): Bundle {
  const { linear: _linear, ...around } = syntheticBundle(choice);
  const random = seededNumbers((choice.seed ?? 1) + 77);
  const d = choice.order ?? 8;
  const pairs = choice.pairs ?? Math.floor(d / 3);
  const r = choice.basis ?? 4;
  const lags = choice.lags ?? [1, 2, 24];
  const nc = around.channels.length;
  const ny = around.channels.filter(({ role }) => role === 'signal').length;
  const width = d + (choice.level === true ? nc : 0);
  const draw = (rows: number, cols: number, size: number): Float64Array =>
    Float64Array.from({ length: rows * cols }, () => (2 * random() - 1) * size);
  const poles = Float64Array.from({ length: d }, () => 0.9 + 0.09 * random());
  for (let k = 0; k < pairs; k++) {
    const angle = 0.1 + 2 * random();
    const modulus = poles[2 * k];
    poles[2 * k] = modulus * Math.cos(angle);
    poles[2 * k + 1] = modulus * Math.sin(angle);
  }
  return {
    ...around,
    kind: 'dense',
    dense: {
      pairs,
      poles: quantiseTensor(poles, 1, d, 'f32'),
      drive: quantiseTensor(draw(d, nc, 0.5), d, nc, 'i8'),
      ...(choice.level === true ? { level: true as const } : {}),
      readout: quantiseTensor(draw(ny * r, width, 0.3 / Math.sqrt(d)), ny * r, width, 'i8'),
      horizonBasis: quantiseTensor(draw(around.horizon, r, 0.5), around.horizon, r, 'i8'),
      ...(lags.length === 0
        ? {}
        : {
            lags,
            lagged: quantiseTensor(
              draw(ny * (choice.lagSteps ?? 3), lags.length, 0.2),
              ny * (choice.lagSteps ?? 3),
              lags.length,
              'i8',
            ),
          }),
    },
  };
}

/** The model of `syntheticDenseBundle(choice)`. */
export function syntheticDense(choice: DenseChoice = {}): DenseModel {
  return modelFromBundle(syntheticDenseBundle(choice)) as DenseModel;
}
