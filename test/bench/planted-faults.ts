/** Faults planted into a signal's readings, from a tick on, in place. */
import { uniforms } from './known-plant.ts';

/** What a fault is measured by. */
export interface FaultSize {
  /** The signal's standard deviation. */
  readonly scale: number;
  readonly dayTicks: number;
  readonly normal: () => number;
}

/** One kind of fault. */
export interface Planted {
  readonly name: string;
  readonly plant: (values: Float64Array, from: number, size: FaultSize) => void;
}

/** Standard normal numbers from a seed, by Box and Muller (1958). */
export function gaussians(seed: number): () => number {
  const draw = uniforms(seed);
  return () => Math.sqrt(-2 * Math.log(1 - draw())) * Math.cos(2 * Math.PI * draw());
}

/** Spread of the changes from reading to reading, of which noise is a part, robustly. */
function noiseOf(values: Float64Array, from: number): number {
  const changes = Array.from({ length: Math.min(from, 2000) }, (_, k) =>
    Math.abs(values[from - k]! - values[from - k - 1]!),
  );
  const sorted = changes.filter((change) => change > 0).sort((a, b) => a - b);
  return (sorted[Math.floor(sorted.length / 2)] ?? 0) / 0.6745 / Math.SQRT2;
}

function each(values: Float64Array, from: number, change: (value: number, k: number) => number): void {
  for (let t = from; t < values.length; t++) values[t] = change(values[t]!, t - from);
}

/** The faults that are planted. */
export const PLANTED: readonly Planted[] = [
  {
    name: 'drift of 3 sd in a day',
    plant: (values, from, { scale, dayTicks }) => each(values, from, (y, k) => y + (3 * scale * k) / dayTicks),
  },
  {
    name: 'noise three times as large',
    plant: (values, from, { normal }) => {
      const noise = noiseOf(values, from);
      // √8: what is added to noise of one to make three.
      each(values, from, (y) => y + Math.sqrt(8) * noise * normal());
    },
  },
  { name: 'scale 1.5', plant: (values, from) => each(values, from, (y) => 1.5 * y) },
  {
    name: 'spikes of 8 sd in 5 % of readings',
    plant: (values, from, { scale, normal }) =>
      each(values, from, (y) => (Math.abs(normal()) > 1.96 ? y + 8 * scale * Math.sign(normal()) : y)),
  },
];
