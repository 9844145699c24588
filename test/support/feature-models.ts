/** Featured and driven bundles for tests, around the same channels and calibration as the synthetic linear ones. Not fitted. */
import { type Bundle, quantiseTensor, type Tensor } from '@stillwell/protocol';
import { type DrivenModel, type FeaturedModel, modelFromBundle } from '@stillwell/runtime/filter';
import { type ModelChoice, seededNumbers, syntheticBundle } from './models.ts';

const drawn = (seed: number) => {
  const random = seededNumbers(seed);
  return (rows: number, cols: number, size: number, type: Tensor['type']): Tensor =>
    quantiseTensor(
      Float64Array.from({ length: rows * cols }, () => (2 * random() - 1) * size),
      rows,
      cols,
      type,
    );
};

/** A bundle of the featured kind: three states, all channels, two lags. */
export function syntheticFeaturedBundle(choice: ModelChoice & { readonly strength?: number } = {}): Bundle {
  const linear = syntheticBundle(choice);
  const draw = drawn((choice.seed ?? 1) + 31);
  const ny = linear.channels.filter(({ role }) => role === 'signal').length;
  const channels = linear.channels.map((_, c) => c);
  const count = 24;
  return {
    ...linear,
    kind: 'featured',
    features: {
      seed: 5,
      count,
      states: 3,
      channels,
      lags: [1, 4],
      scale: Array.from({ length: 3 + 3 * channels.length }, (_, k) => 0.3 + 0.1 * (k % 3)),
      projection: draw(2, (choice.order ?? 8) + count, 0.4, 'i8'),
      offset: draw(2, 1, 0.2, 'f32'),
      readout: draw(ny * (choice.basis ?? 4), 2, choice.strength ?? 0.3, 'i8'),
    },
  };
}

/** The model of `syntheticFeaturedBundle(choice)`. */
export function syntheticFeatured(choice: ModelChoice & { readonly strength?: number } = {}): FeaturedModel {
  return modelFromBundle(syntheticFeaturedBundle(choice)) as FeaturedModel;
}

/** A bundle of the driven kind: three members with one hidden state; two signals and one input unless chosen otherwise. */
export function syntheticDrivenBundle(choice: ModelChoice = {}): Bundle {
  const { linear: _linear, ...around } = syntheticBundle({ inputs: ['pump'], ...choice });
  const draw = drawn((choice.seed ?? 1) + 47);
  const nc = around.channels.length;
  const ny = around.channels.filter(({ role }) => role === 'signal').length;
  const n = ny + 1;
  const members = 3;
  return {
    ...around,
    kind: 'driven',
    driven: {
      seed: 9,
      width: 2,
      members,
      hidden: 1,
      features: 12,
      linear: draw(members * n, n + nc - ny + 1, 0.3, 'i16'),
      gain: draw(members * n, 12, 0.1, 'i8'),
      start: draw(members, nc + 1, 0.5, 'i16'),
      sensor: Array.from({ length: ny }, () => [-2.5, 2.5] as const),
      fadeDecays: [0.6, 0.95],
      meanDecays: [0.5, 0.9, 0.97],
      deviation: draw(ny * 2, 4, 0.4, 'i16'),
      inputs: draw((nc - ny) * 2, 4, 0.2, 'i16'),
      settleTicks: 40,
    },
  };
}

/** The model of `syntheticDrivenBundle(choice)`. */
export function syntheticDriven(choice: ModelChoice = {}): DrivenModel {
  return modelFromBundle(syntheticDrivenBundle(choice)) as DrivenModel;
}
